// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Random requests through every kind of channel: the judge of logs accepts every command, every read
// completes, and the counts are those of the log.
#include <catch2/catch.hpp>
#include <map>
#include <random>
#include <tuple>

#include "earshot/dram/grade_file.h"
#include "outside/dram_drive.h"

namespace earshot {
namespace {

// Bursts of requests and pauses, over few rows, so that there are hits, conflicts and idle times.
void play(DrivenChannel& driven, const DramConfig& config, unsigned count, std::mt19937& random) {
  Clocks clock = 0;
  for (unsigned i = 0; i < count; ++i) {
    if (random() % 16 == 0) clock += random() % 200;
    if (random() % 200 == 0) clock += random() % (3 * config.grade.trefi);
    DramRequest request;
    request.write = random() % 3 == 0;
    request.place.rank = static_cast<unsigned>(random() % config.ranks);
    request.place.group = static_cast<unsigned>(random() % config.grade.bank_groups);
    request.place.bank = static_cast<unsigned>(random() % config.grade.banks_per_group);
    request.place.row = random() % 3;
    request.place.column = random() % config.columns();
    clock = driven.put_when_accepted(request, clock);
  }
  driven.finish();
}

std::map<DramCommand, std::uint64_t> tally(const std::vector<CommandRecord>& log) {
  std::map<DramCommand, std::uint64_t> counts;
  for (const CommandRecord& command : log) ++counts[command.command];
  return counts;
}

void check_run(const DramConfig& config, unsigned requests, std::mt19937& random) {
  REQUIRE(config.problems().empty());
  DrivenChannel driven(config);
  play(driven, config, requests, random);
  CHECK(driven.all_done());
  const Clocks end = driven.now() + 1;
  const std::vector<CommandRecord> log = driven.legal_log(end);
  CHECK(driven.channel().broken_laws(end).empty());
  const DramCounts counts = driven.channel().counts(end);
  std::map<DramCommand, std::uint64_t> of = tally(log);
  CHECK(counts.activates == of[DramCommand::activate]);
  CHECK(counts.read_bursts == of[DramCommand::read] + of[DramCommand::read_precharge]);
  CHECK(counts.write_bursts == of[DramCommand::write] + of[DramCommand::write_precharge]);
  CHECK(counts.refreshes == of[DramCommand::refresh]);
  CHECK(counts.bank_refreshes == of[DramCommand::refresh_bank]);
  CHECK(counts.read_bursts + counts.write_bursts + counts.reads_from_queue + counts.writes_merged ==
        requests);
  CHECK(counts.row_hits + counts.row_closed + counts.row_conflicts ==
        counts.read_bursts + counts.write_bursts);
  CHECK(counts.data_bus_busy == (counts.read_bursts + counts.write_bursts) * config.grade.burst_clocks());
}

}  // namespace

TEST_CASE("Whatever is asked of a channel, its commands are legal and its counts those of its log",
          "[dram]") {
  std::mt19937 random(79);
  for (const std::string& name : builtin_grades()) {
    for (const unsigned width : grade_range(name).device_bits) {
      for (const DramScheduling scheduling :
           {DramScheduling::one_at_a_time, DramScheduling::first_come, DramScheduling::first_ready}) {
        for (const DramRows rows : {DramRows::open, DramRows::closed, DramRows::idle_timeout}) {
          for (const DramRefresh refresh : {DramRefresh::all_bank, DramRefresh::per_bank, DramRefresh::off}) {
            DramConfig config = quiet(load_grade(name, 0, width));
            if (refresh == DramRefresh::per_bank && config.grade.trefi_bank == 0) continue;
            config.ranks = 1u << random() % 3;
            config.scheduling = scheduling;
            config.rows = rows;
            config.refresh = refresh;
            config.row_first = random() % 2 == 0;
            config.age_cap = random() % 2 == 0 ? 100 : 2000;
            INFO(name << " x" << width << ", " << config.ranks << " ranks, scheduling "
                      << static_cast<int>(scheduling) << ", rows " << static_cast<int>(rows) << ", refresh "
                      << static_cast<int>(refresh));
            check_run(config, 1000, random);
          }
        }
      }
    }
  }
}

// Random requests at random clocks to a channel whose driver comes for every event, or only for reads and
// writes.
struct Outcome {
  std::vector<CommandRecord> log;
  std::vector<DramCompletion> completions;
  unsigned columns_too_soon = 0;
};

Outcome outcome_of(const DramConfig& config, unsigned requests, std::mt19937 random, bool every_event) {
  DramChannel channel(config);
  Outcome outcome;
  const auto next = [&] { return every_event ? channel.next_event() : channel.next_column(); };
  const auto go_on = [&](Clocks clock) {
    const std::size_t before = outcome.completions.size();
    const bool too_soon = clock < channel.next_column();
    channel.advance(clock, outcome.completions);
    if (too_soon) outcome.columns_too_soon += static_cast<unsigned>(outcome.completions.size() - before);
  };
  Clocks clock = 0;
  for (unsigned i = 0; i < requests; ++i) {
    clock += random() % 4 == 0 ? random() % 60 : 0;
    if (random() % 200 == 0) clock += random() % (3 * config.grade.trefi);
    DramBurst burst;
    burst.id = i;
    burst.write = random() % 3 == 0;
    burst.place.rank = static_cast<unsigned>(random() % config.ranks);
    burst.place.group = static_cast<unsigned>(random() % config.grade.bank_groups);
    burst.place.bank = static_cast<unsigned>(random() % config.grade.banks_per_group);
    burst.place.row = random() % 3;
    burst.place.column = random() % 8;
    burst.number = DramAddressMap(config).burst(burst.place);
    burst.last = config.burst_bytes();
    while (next() <= clock) go_on(next());
    while (!channel.accepts(burst.write)) go_on(clock = std::max(clock, next()));
    if (!every_event) channel.catch_up(clock);
    channel.enqueue(burst, clock, outcome.completions);
  }
  while (next() != DramChannel::never) go_on(clock = std::max(clock, next()));
  outcome.log = channel.commands(clock + 1);
  return outcome;
}

TEST_CASE("A channel does the same for a driver who comes for reads and writes only", "[dram]") {
  std::mt19937 random(11);
  for (unsigned run = 0; run < 120; ++run) {
    DramConfig config;
    config.grade = load_grade(builtin_grades()[random() % builtin_grades().size()]);
    config.log_commands = true;
    config.ranks = 1 + random() % 2;
    config.scheduling = static_cast<DramScheduling>(random() % 3);
    config.rows = static_cast<DramRows>(random() % 3);
    config.row_first = random() % 2 == 0;
    config.age_cap = random() % 2 == 0 ? 100 : 2000;
    config.refresh = config.grade.trefi_bank != 0 && random() % 2 == 0 ? DramRefresh::per_bank
                                                                         : DramRefresh::all_bank;
    const std::mt19937 seed(static_cast<unsigned>(random()));
    const Outcome eager = outcome_of(config, 500, seed, true);
    const Outcome late = outcome_of(config, 500, seed, false);
    CHECK(eager.columns_too_soon == 0);
    REQUIRE(eager.log.size() == late.log.size());
    unsigned differences = 0;
    for (std::size_t i = 0; i < eager.log.size(); ++i) {
      const CommandRecord &one = eager.log[i], &other = late.log[i];
      differences += std::tie(one.clock, one.command, one.rank, one.bank_group, one.bank) !=
                     std::tie(other.clock, other.command, other.rank, other.bank_group, other.bank);
      differences += std::tie(one.row, one.column) != std::tie(other.row, other.column);
    }
    REQUIRE(eager.completions.size() == late.completions.size());
    for (std::size_t i = 0; i < eager.completions.size(); ++i) {
      const DramCompletion &one = eager.completions[i], &other = late.completions[i];
      differences += std::tie(one.id, one.started, one.done) != std::tie(other.id, other.started, other.done);
    }
    CHECK(differences == 0);
  }
}

TEST_CASE("Constraints that others imply in the standards' grades hold where they do not", "[dram]") {
  std::mt19937 random(209);
  for (const std::string& name : builtin_grades()) {
    for (const DramScheduling scheduling : {DramScheduling::first_come, DramScheduling::first_ready}) {
      DramConfig config = quiet(load_grade(name));
      config.grade.trc += 5;     // above tRAS + tRP
      config.grade.tccd_s += 1;  // above the burst
      config.grade.tccd_l += 2;
      config.grade.tccd_l_wr += 3;
      config.grade.trp_all += 4;
      config.grade.rank_switch = 3;
      config.scheduling = scheduling;
      config.ranks = 2;
      config.refresh = DramRefresh::all_bank;
      INFO(name);
      check_run(config, 5000, random);
    }
  }
}

TEST_CASE("The judge accepts a long run of two busy ranks", "[dram]") {
  std::mt19937 random(1979);
  DramConfig config = quiet(load_grade("ddr4-3200aa"));
  config.ranks = 2;
  config.refresh = DramRefresh::all_bank;
  check_run(config, 100'000, random);
}

}  // namespace earshot
