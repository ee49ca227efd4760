// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Refresh: how often, how late, and what it costs. The judge of logs (dram/command_checker.h) knows the
// standards' limits: at most 8 postponed, at most 9 tREFI apart (Winbond W632GU6NB Rev A01, 8.15;
// AS4C256M16D4, p.57).
#include <catch2/catch.hpp>
#include <cmath>
#include <random>

#include "outside/dram_drive.h"

namespace earshot {
namespace {

DramConfig refreshed(const Grade& grade, DramRefresh refresh = DramRefresh::all_bank) {
  DramConfig config = quiet(grade);
  config.refresh = refresh;
  return config;
}

std::vector<DramRequest> row_hits(const DramConfig& config, unsigned count) {
  std::vector<DramRequest> requests;
  for (unsigned i = 0; i < count; ++i) {
    requests.push_back({false, place(config.grade, i % config.grade.bank_groups, 1,
                                     i / config.grade.bank_groups % config.columns())});
  }
  return requests;
}

}  // namespace

TEST_CASE("A rank is refreshed at least 8192 times in 64 ms, in 32 ms where the standard wants that",
          "[outside][dram]") {
  // Micron 8Gb DDR4, features: 8192 in 64 ms. 64 ms / 8192 = 7.8125 us is printed as 7.8, so there are a few
  // more. LPDDR4 (JESD209-4) and DDR5 (JESD79-5): 32 ms.
  const struct {
    const char* name;
    Picoseconds retention;
  } table[] = {{"ddr3-1600k", 64'000'000'000},
               {"ddr4-2400t", 64'000'000'000},
               {"ddr4-3200aa", 64'000'000'000},
               {"lpddr4-3200", 32'000'000'000},
               {"ddr5-4800b", 32'000'000'000}};
  for (const auto& want : table) {
    INFO(want.name);
    DrivenChannel idle(refreshed(load_grade(want.name)));
    const Clocks end = load_grade(want.name).clock.edge_at_or_after(want.retention);
    const std::vector<CommandRecord> log = idle.legal_log(end);
    CHECK(log.size() >= 8192);
    CHECK(log.size() <= 8206);  // 64 ms / 7.8 us = 8205.1
    CHECK(idle.channel().counts(end).refreshes == log.size());
  }
}

TEST_CASE("Banks refreshed by themselves are each refreshed 8192 times in 32 ms", "[outside][dram]") {
  const Grade grade = load_grade("lpddr4-3200");  // JESD209-4
  DrivenChannel idle(refreshed(grade, DramRefresh::per_bank));
  const Clocks end = grade.clock.edge_at_or_after(32'000'000'000);
  std::vector<unsigned> of_bank(grade.banks());
  for (const CommandRecord& command : idle.legal_log(end)) {
    REQUIRE(command.command == DramCommand::refresh_bank);
    ++of_bank[command.bank];
  }
  for (const unsigned count : of_bank) CHECK(count >= 8192);
}

TEST_CASE("Under load 8 refreshes are postponed and no more, and none is lost", "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    for (const DramRefresh refresh : {DramRefresh::all_bank, DramRefresh::per_bank}) {
      const Grade grade = load_grade(name);
      if (refresh == DramRefresh::per_bank && grade.trefi_bank == 0) continue;
      INFO(name);
      const DramConfig config = refreshed(grade, refresh);
      DrivenChannel driven(config);
      // 40 tREFI of them
      driven.stream(row_hits(config, static_cast<unsigned>(40 * grade.trefi / grade.tccd_s)));
      const std::vector<CommandRecord> log = driven.legal_log();
      const std::uint64_t limit = refresh == DramRefresh::per_bank ? 8 * grade.banks() : 8;
      const DramCounts counts = driven.channel().counts(log.back().clock + 1);
      CHECK(counts.most_postponed >= limit);
      CHECK(counts.most_postponed <= limit + 1);  // at the very moment the next falls due
      // The first falls due after one interval; those owed at the end are not in.
      CHECK(counts.refreshes + counts.bank_refreshes / grade.banks() + limit >=
            log.back().clock / grade.trefi);
    }
  }
}

TEST_CASE("A read that arrives during a refresh is answered as if it had come at its end",
          "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    for (const DramRefresh refresh : {DramRefresh::all_bank, DramRefresh::per_bank}) {
      const Grade grade = load_grade(name);
      const bool per_bank = refresh == DramRefresh::per_bank;
      if (per_bank && grade.trefi_bank == 0) continue;
      INFO(name);
      DrivenChannel driven(refreshed(grade, refresh));
      // An idle rank is refreshed when that falls due, bank 0 first.
      const Clocks begin = per_bank ? grade.trefi_bank : grade.trefi;
      const Clocks end = begin + (per_bank ? grade.trfc_bank : grade.trfc);
      const unsigned id = driven.put({false, place(grade, 0, 1)}, begin + 10);
      driven.finish();
      const std::vector<CommandRecord> log = driven.legal_log();
      CHECK(log.front().clock == begin);
      CHECK(driven.done(id) == end + grade.trcd + grade.cl + grade.burst_clocks());
    }
  }
}

TEST_CASE("Refresh takes tRFC of every tREFI from a stream of row hits, and little more", "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const Grade grade = load_grade(name);
    const DramConfig config = refreshed(grade);
    DrivenChannel driven(config);
    driven.stream(row_hits(config, static_cast<unsigned>(100 * grade.trefi / grade.tccd_s)));
    std::vector<Clocks> refreshes;
    const std::vector<CommandRecord> log = driven.legal_log();
    for (const CommandRecord& command : log) {
      if (command.command == DramCommand::refresh) refreshes.push_back(command.clock);
    }
    // From one to another, many later: whole intervals.
    REQUIRE(refreshes.size() > 60);
    const Clocks from = refreshes[10], to = refreshes[60];
    const auto hits = std::count_if(log.begin(), log.end(), [&](const CommandRecord& command) {
      return command.command == DramCommand::read && command.clock >= from && command.clock < to;
    });
    const double use = static_cast<double>(hits) * grade.burst_clocks() / static_cast<double>(to - from);
    const double refresh = static_cast<double>(grade.trfc) / grade.trefi;
    // The rank is made ready beforehand, and its rows opened again.
    const double besides = static_cast<double>(grade.write_to_precharge() + grade.tras + 2 * grade.trp_all +
                                               grade.trcd + grade.tfaw + 4 * grade.trrd_s + 16) /
                           grade.trefi;
    CHECK(use <= 1 - refresh);
    CHECK(use >= 1 - refresh - besides);
  }
}

TEST_CASE("Poisson probes of an idle device wait tRFC^2 / (2 tREFI) for refresh on average",
          "[outside][dram]") {
  // Own arithmetic: a probe finds a refresh with probability tRFC / tREFI and then waits half of it.
  const struct {
    const char* name;
    unsigned density;
    double mean_ns;
  } table[] = {
      {"ddr4-2400t", 8, 7.85}, {"ddr4-2400t", 16, 19.4}, {"ddr3-1600k", 4, 4.33}, {"ddr5-4800b", 16, 11.2}};
  for (const auto& want : table) {
    INFO(want.name << " " << want.density << " Gbit");
    const Grade grade = load_grade(want.name, want.density);
    DramConfig config = refreshed(grade);
    config.rows = DramRows::closed;
    DrivenChannel driven(config);
    const double period_ns =
        static_cast<double>(grade.clock.picoseconds) / static_cast<double>(grade.clock.clocks) / 1000;
    const Clocks unloaded = grade.trcd + grade.cl + grade.burst_clocks();

    // So seldom that probes do not meet, in other banks by turns.
    constexpr unsigned probes = 100'000;
    constexpr double mean_gap_ns = 20'000;
    std::mt19937_64 random(20261201);
    double time = 0, sum = 0, sum_of_squares = 0;
    std::vector<std::pair<unsigned, Clocks>> sent;
    for (unsigned i = 0; i < probes; ++i) {
      time += -std::log(1 - std::uniform_real_distribution<double>()(random)) * mean_gap_ns;
      const Clocks clock = static_cast<Clocks>(time / period_ns);
      sent.emplace_back(driven.put({false, place(grade, i, 1 + i % 1000)}, clock), clock);
    }
    driven.finish();
    driven.legal_log();
    double longest = 0;
    for (const auto& [id, clock] : sent) {
      const double wait = static_cast<double>(driven.done(id) - clock - unloaded) * period_ns;
      sum += wait;
      sum_of_squares += wait * wait;
      longest = std::max(longest, wait);
    }
    const double mean = sum / probes;
    const double deviation = std::sqrt((sum_of_squares / probes - mean * mean) / probes);
    const double trfc = grade.trfc * period_ns, trefi = grade.trefi * period_ns;
    INFO("mean " << mean << " ns, 99 % confidence " << 2.576 * deviation << " ns");
    CHECK(std::abs(mean - trfc * trfc / (2 * trefi)) < 2.576 * deviation);
    CHECK(std::abs(mean - want.mean_ns) < 2.576 * deviation + 0.05);  // rounded as printed here
    CHECK(2.576 * deviation < 0.06 * mean);
    CHECK(longest > 0.98 * trfc);
    CHECK(longest < trfc + (grade.trc + 8 * grade.trrd_l) * period_ns);
  }
}

}  // namespace earshot
