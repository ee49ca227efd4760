// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An unsound table never gets past the prover, so these break one row of a compiled table and run it all the same:
// the monitor must see what the prover would have refused.
#include <catch2/catch.hpp>

#include "dram/command_checker.h"
#include "played.h"
#include "simulate.h"

using namespace earshot;

namespace {

StateId id_of(const Table& table, const std::string& name) {
  for (std::size_t i = 0; i < table.states().size(); ++i)
    if (table.states()[i].name == name) return static_cast<StateId>(i);
  throw std::logic_error("no state " + name);
}

// `table` with the row of a state and a snoop event changed by `change`.
template <typename Change>
Table broken(const std::string& name, const std::string& state, Event event, Change change) {
  const Table table = load_table(name);
  Row row = table.row(id_of(table, state), event, false);
  change(row);
  return table.with_row(id_of(table, state), event, false, row);
}

// Plays a uniform pattern and returns the finding's text.
std::string finding(const Table& table, const std::string& order, const std::vector<std::string>& more = {},
                    PlayerHooks hooks = {}) {
  std::vector<std::string> arguments{
      "--workload.pattern=uniform", "--workload.accesses=2000", "--workload.lines=16",
      "--caches.size=256",          "--caches.ways=2",          "--monitor=on",
      "--workload.order=" + order};
  arguments.insert(arguments.end(), more.begin(), more.end());
  Settings settings = read_settings("", arguments);
  settings.dram.log_commands = true;
  hooks.failed = [] { sc_core::sc_stop(); };
  sc_core::sc_set_stop_mode(sc_core::SC_STOP_IMMEDIATE);
  Platform platform(settings, std::make_shared<const Table>(table), hooks);
  try {
    play(settings, platform);
  } catch (const Finding& found) {
    for (const WindowMemory* memory : platform.cached_memories())
      if (memory->dram() != nullptr) require_legal(memory->dram()->commands(0), settings.dram);
    return found.what();
  }
  return "no finding";
}

}  // namespace

TEST_CASE("a dropped supply is found as a stale read or stale memory, with the line's last events",
          "[platforms]") {
  const std::string text = finding(
      broken("dirty-owner-update", "D", Event::snoop_read, [](Row& row) { row.supply = false; }), "recorded");
  CHECK_THAT(text, Catch::StartsWith("coherence violation at access "));
  CHECK_THAT(text, Catch::Contains("the last value written there is"));
  CHECK_THAT(text, Catch::Contains("the line's last events:\n    access "));
}

TEST_CASE("a copy that does not take an update is found in concurrent order too", "[platforms]") {
  CHECK_THAT(
      finding(broken("dragon", "Sc", Event::snoop_update, [](Row& row) { row.take = false; }), "concurrent"),
      Catch::Contains("the last value written there is"));
}

TEST_CASE("a second owner is found", "[platforms]") {
  const Table dragon = load_table("dragon");
  CHECK_THAT(
      finding(broken("dragon", "Sm", Event::snoop_update, [&](Row& row) { row.next = id_of(dragon, "Sm"); }),
              "recorded"),
      Catch::Contains("the line has two owners, cache "));
}

TEST_CASE("memory left stale without an owner is found", "[platforms]") {
  CHECK_THAT(
      finding(broken("msi", "M", Event::snoop_read, [](Row& row) { row.write_memory = false; }), "recorded"),
      Catch::Contains("nobody owns the line, but memory is stale"));
}

TEST_CASE("a silently writable copy that is not alone is found", "[platforms]") {
  const Table mesi = load_table("mesi");
  std::string exclusive;
  for (const State& state : mesi.states())
    if (state.writable && !state.owner) exclusive = state.name;
  CHECK_THAT(finding(broken("mesi", exclusive, Event::snoop_read,
                            [&](Row& row) { row.next = id_of(mesi, exclusive); }),
                     "recorded"),
             Catch::Contains("may write the line silently, but it is not the only copy"));
}

TEST_CASE("a violation is found in arbitrated timing, whose accesses take effect in method processes",
          "[platforms]") {
  const Table table =
      broken("dirty-owner-update", "D", Event::snoop_read, [](Row& row) { row.supply = false; });
  const std::string text = finding(table, "concurrent", {"--timing=arbitrated"});
  CHECK_THAT(text, Catch::StartsWith("coherence violation at access "));
  CHECK_THAT(text, Catch::Contains("the line's last events:\n    access "));
}

TEST_CASE("a violation is found with several accesses in flight over DRAM", "[platforms]") {
  CHECK_THAT(finding(broken("dragon", "Sc", Event::snoop_update, [](Row& row) { row.take = false; }),
                     "concurrent", {"--timing=arbitrated", "--workload.outstanding=4", "--memory.kind=dram"}),
             Catch::Contains("the last value written there is"));
}

TEST_CASE("an initiator that never goes on is a finding, annotated", "[platforms]") {
  sc_core::sc_event never("never");
  int accesses = 0;
  PlayerHooks hooks;
  hooks.done = [&] {
    if (++accesses == 100) sc_core::wait(never);
  };
  CHECK_THAT(finding(load_table("mesi"), "concurrent", {}, hooks),
             Catch::StartsWith("nothing can happen any more, at ") &&
                 Catch::Contains("1 of the players have not played all"));
}

TEST_CASE("an initiator that never goes on is a finding, arbitrated", "[platforms]") {
  sc_core::sc_event never("never");
  int accesses = 0;
  PlayerHooks hooks;
  hooks.done = [&] {
    if (++accesses == 100) sc_core::wait(never);
  };
  CHECK_THAT(finding(load_table("mesi"), "recorded", {"--timing=arbitrated"}, hooks),
             Catch::StartsWith("nothing can happen any more, at ") &&
                 Catch::Contains("1 of the players have not played all"));
}
