// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Next-state tables of M. J. Flynn, "Computer Architecture: Pipelined and Parallel Processor Design", Jones &
// Bartlett 1995, appendix F, row by row against the built-in tables: F.5 (Illinois, processor side), F.9 and
// F.10 (Firefly, processor and bus side), F.11 (Dragon, processor side).
//
// Flynn's bus write-miss is one operation; here a write miss of the updating protocols is a read followed, if
// others hold the line, by a broadcast of the word. Flynn's miss rows of a valid state are about the victim:
// it is written back or not, then the rows of state I apply.
#include <catch2/catch.hpp>
#include <map>
#include <string>
#include <vector>

#include "earshot/protocol/table.h"

namespace earshot {
namespace {

using Names = std::map<std::string, std::string>;  // Flynn's state name to ours

// The transactions that one processor event issues and the state it ends in, as "read update -> SD".
class FlynnView {
 public:
  FlynnView(const std::string& table, Names ours) : table_(load_table(table)), ours_(std::move(ours)) {}

  // `shared`: whether at least one other cache has the block, during the whole event.
  std::string local(const std::string& state, Event event, bool shared) const {
    std::string issued;
    StateId now = id(state);
    for (int round = 0; round < 4; ++round) {
      const Row& row = table_.row(now, event, shared);
      if (!row.defined) return "cannot occur";
      if (row.uses_bus) issued += std::string(name_of(row.bus)) + " ";
      now = row.next;
      if (!row.again) return issued + "-> " + flynn_name(now);
    }
    return "without end";
  }

  // What a holder does on another cache's transaction, as "supply write-memory -> S".
  std::string snooped(const std::string& state, Event event) const {
    const Row& row = table_.row(id(state), event, true);
    if (!row.defined) return "cannot occur";
    return std::string(row.supply ? "supply " : "") + (row.write_memory ? "write-memory " : "") +
           (row.take ? "take " : "") + "-> " + flynn_name(row.next);
  }

 private:
  StateId id(const std::string& flynn_state) const {
    for (std::size_t i = 0; i < table_.states().size(); ++i) {
      if (table_.states()[i].name == ours_.at(flynn_state)) return static_cast<StateId>(i);
    }
    throw std::out_of_range(flynn_state);
  }

  std::string flynn_name(StateId state) const {
    for (const auto& [flynn, ours] : ours_) {
      if (ours == table_.state(state).name) return flynn;
    }
    return "?";
  }

  Table table_;
  Names ours_;
};

struct LocalRow {
  const char* state;
  Event event;
  bool shared;
  const char* outcome;
};

struct SnoopRow {
  const char* state;
  Event event;
  const char* outcome;
};

void check_local(const FlynnView& view, const std::vector<LocalRow>& rows) {
  for (const LocalRow& row : rows) {
    INFO(row.state << " " << name_of(row.event) << (row.shared ? " shared" : " alone"));
    CHECK(view.local(row.state, row.event, row.shared) == row.outcome);
  }
}

}  // namespace

TEST_CASE("Dragon does what Flynn's table F.11 says", "[outside][protocol]") {
  const FlynnView dragon("dragon", {{"I", "I"}, {"VE", "E"}, {"SC", "Sc"}, {"SD", "Sm"}, {"D", "M"}});
  const std::vector<LocalRow> rows = {
      // row I: bus read; shared -> SC else VE. Write miss: shared -> SD and bus write, else D.
      {"I", Event::read, true, "read -> SC"},
      {"I", Event::read, false, "read -> VE"},
      {"I", Event::write, true, "read update -> SD"},
      {"I", Event::write, false, "read -> D"},
      // read hits change nothing
      {"VE", Event::read, false, "-> VE"},
      {"SC", Event::read, true, "-> SC"},
      {"SD", Event::read, true, "-> SD"},
      {"D", Event::read, false, "-> D"},
      // write hits: VE and D locally; SC and SD by a bus write, shared -> SD else D
      {"VE", Event::write, false, "-> D"},
      {"SC", Event::write, true, "update -> SD"},
      {"SC", Event::write, false, "update -> D"},
      {"SD", Event::write, true, "update -> SD"},
      {"SD", Event::write, false, "update -> D"},
      {"D", Event::write, false, "-> D"},
      // misses of a valid row: "victim written to memory" in SD and D only
      {"VE", Event::replace, false, "-> I"},
      {"SC", Event::replace, false, "-> I"},
      {"SD", Event::replace, false, "write-back -> I"},
      {"D", Event::replace, false, "write-back -> I"},
  };
  check_local(dragon, rows);
  // Section 8, figure 8.24: on a read miss holders in Read Private (VE) or Shared Clean become Shared Clean;
  // on a write miss served by caches all holders become Shared Clean.
  CHECK(dragon.snooped("VE", Event::snoop_read) == "-> SC");
  CHECK(dragon.snooped("SC", Event::snoop_read) == "-> SC");
  CHECK(dragon.snooped("SC", Event::snoop_update) == "take -> SC");
  CHECK(dragon.snooped("SD", Event::snoop_update) == "take -> SC");
}

TEST_CASE("Firefly does what Flynn's table F.9 says", "[outside][protocol]") {
  const FlynnView firefly("firefly", {{"I", "I"}, {"VE", "VE"}, {"S", "S"}, {"D", "D"}});
  const std::vector<LocalRow> rows = {
      // row I: read miss from memory -> VE, else -> S; write miss: data from memory -> D, else -> S and
      // write to memory
      // and sharers
      {"I", Event::read, false, "read -> VE"},
      {"I", Event::read, true, "read -> S"},
      {"I", Event::write, false, "read -> D"},
      {"I", Event::write, true, "read write-through -> S"},
      // write hits: VE and D locally; S writes to memory and the other caches, no sharer left -> VE
      {"VE", Event::write, false, "-> D"},
      {"S", Event::write, true, "write-through -> S"},
      {"S", Event::write, false, "write-through -> VE"},
      {"D", Event::write, false, "-> D"},
      // misses of a valid row: victim to memory in D only
      {"VE", Event::replace, false, "-> I"},
      {"S", Event::replace, false, "-> I"},
      {"D", Event::replace, false, "write-back -> I"},
  };
  check_local(firefly, rows);
}

TEST_CASE("Firefly does what Flynn's table F.10 says", "[outside][protocol]") {
  const FlynnView firefly("firefly", {{"I", "I"}, {"VE", "VE"}, {"S", "S"}, {"D", "D"}});
  const std::vector<SnoopRow> rows = {
      // bus read; also the first half of a bus write-miss
      {"VE", Event::snoop_read, "supply -> S"},
      {"S", Event::snoop_read, "supply -> S"},
      {"D", Event::snoop_read, "supply write-memory -> S"},
      // bus write; for S also the second half of a bus write-miss, whose first half leaves every holder in S
      {"VE", Event::snoop_write_through, "cannot occur"},
      {"S", Event::snoop_write_through, "take -> S"},
      {"D", Event::snoop_write_through, "cannot occur"},
  };
  for (const SnoopRow& row : rows) {
    INFO(row.state << " " << name_of(row.event));
    CHECK(firefly.snooped(row.state, row.event) == row.outcome);
  }
}

TEST_CASE("MESI does what Flynn's table F.5 says of Illinois", "[outside][protocol]") {
  const FlynnView illinois("mesi", {{"I", "I"}, {"VE", "E"}, {"S", "S"}, {"D", "M"}});
  const std::vector<LocalRow> rows = {
      // row I: read miss from memory -> VE else S; write miss -> D
      {"I", Event::read, false, "read -> VE"},
      {"I", Event::read, true, "read -> S"},
      {"I", Event::write, false, "read-exclusive -> D"},
      {"I", Event::write, true, "read-exclusive -> D"},
      // write hits: VE and D locally; S by a bus invalidation
      {"VE", Event::write, false, "-> D"},
      {"S", Event::write, true, "upgrade -> D"},
      {"S", Event::write, false, "upgrade -> D"},
      {"D", Event::write, false, "-> D"},
      // misses of a valid row: victim to memory in D only
      {"VE", Event::replace, false, "-> I"},
      {"S", Event::replace, false, "-> I"},
      {"D", Event::replace, false, "write-back -> I"},
  };
  check_local(illinois, rows);
  // Section 8: a miss served by another cache leaves the holders Read Shared; on a write miss they
  // invalidate.
  for (const char* holder : {"VE", "S", "D"}) {
    INFO(holder);
    CHECK(illinois.snooped(holder, Event::snoop_read) ==
          (holder[0] == 'D' ? "supply write-memory -> S" : "supply -> S"));
    CHECK(illinois.snooped(holder, Event::snoop_read_exclusive) == "supply -> I");
  }
}

}  // namespace earshot
