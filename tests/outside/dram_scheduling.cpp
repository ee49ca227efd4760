// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What scheduling gains: figure 1 of S. Rixner et al., "Memory Access Scheduling", ISCA 2000 (values from
// memory; an exhaustive search over all interleavings confirms the 19), and streams whose cost is plain
// arithmetic.
#include <catch2/catch.hpp>
#include <cmath>
#include <random>

#include "outside/dram_drive.h"

namespace earshot {
namespace {

// The figure's DRAM: precharge 3, activate 3, column access 1, one command a cycle, nothing else. Two banks.
// Data are there in the cycle of the column access.
Grade figure_1() {
  Grade grade;
  grade.name = "figure 1";
  grade.density_gbit = 1;
  grade.device_bits = 8;
  grade.banks_per_group = 2;
  grade.rows = 16;
  grade.page_bytes = 64;
  grade.burst_length = 2;
  grade.cl = grade.cwl = 0;
  grade.trcd = grade.trp = grade.trp_all = 3;
  grade.tras = 3;
  grade.trc = 6;
  grade.trrd_s = grade.trrd_l = grade.tfaw = grade.tccd_s = grade.tccd_l = grade.tccd_l_wr = 1;
  grade.trtp = grade.twr = grade.twtr_s = grade.twtr_l = grade.read_to_write = 1;
  grade.rank_switch = 0;
  grade.trefi = 1'000'000;
  grade.trfc = 10;
  return grade;
}

struct Reference {
  unsigned bank;
  std::uint64_t row, column;
};

const Reference references[] = {{0, 0, 0}, {0, 1, 0}, {0, 0, 1}, {0, 1, 3},
                                {1, 0, 0}, {1, 1, 1}, {1, 0, 1}, {1, 1, 2}};

// Cycles from the arrival of all references to the end of the last, with other rows open before.
Clocks cycles(DramScheduling scheduling) {
  DramConfig config = quiet(figure_1());
  config.scheduling = scheduling;
  config.row_first = true;
  DrivenChannel driven(config);
  for (unsigned bank : {0u, 1u}) driven.put({false, place(config.grade, bank, 9)}, 0);
  driven.finish();
  constexpr Clocks start = 100;
  std::vector<unsigned> ids;
  for (const Reference& each : references) {
    ids.push_back(driven.put({false, place(config.grade, each.bank, each.row, each.column)}, start));
  }
  driven.finish();
  driven.legal_log();
  Clocks end = 0;
  for (const unsigned id : ids) end = std::max(end, driven.done(id));
  return end - start;
}

// Reads of one bank whose rows take turns, all queued at once.
DramCounts two_rows(const Grade& grade, DramScheduling scheduling, unsigned reads, Clocks& clocks) {
  DramConfig config = quiet(grade);
  config.scheduling = scheduling;
  DrivenChannel driven(config);
  unsigned last = 0;
  Clocks end = 0;
  for (unsigned i = 0; i < reads; ++i) last = driven.put({false, place(grade, 0, 1 + i % 2, i / 2)}, 0);
  driven.finish();
  driven.legal_log();
  for (unsigned id = 0; id <= last; ++id) end = std::max(end, driven.done(id));
  clocks = end;
  return driven.channel().counts(end);
}

}  // namespace

TEST_CASE("Figure 1 of Memory Access Scheduling: 56 cycles in order, 19 scheduled", "[outside][dram]") {
  CHECK(cycles(DramScheduling::one_at_a_time) == 56);
  CHECK(cycles(DramScheduling::first_ready) == 19);
}

TEST_CASE("Of two rows that take turns, scheduling opens each once, order every time", "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const Grade g = load_grade(name);
    constexpr unsigned reads = 32;
    Clocks clocks = 0;
    CHECK(two_rows(g, DramScheduling::first_come, reads, clocks).activates == reads);
    CHECK(clocks == (reads - 1) * g.trc + g.trcd + g.cl + g.burst_clocks());
    CHECK(two_rows(g, DramScheduling::first_ready, reads, clocks).activates == 2);
    // open, half of the reads, and again
    const Clocks row = g.trcd + (reads / 2 - 1) * g.tccd_l;
    CHECK(clocks == std::max<Clocks>(row + g.trtp, g.tras) + g.trp + row + g.cl + g.burst_clocks());
  }
}

TEST_CASE("n requests at random hit as many of m banks as Flynn's B(m,n) says", "[outside][dram]") {
  // M. J. Flynn, "Computer Architecture", Jones and Bartlett 1995, section 6.3: B(m,n) = m (1 - (1 - 1/m)^n)
  const struct {
    unsigned m, n;
    double hit;
  } table[] = {{2, 2, 1.5}, {4, 4, 2.734375}, {8, 8, 5.251129}, {16, 4, 3.640381}, {16, 16, 10.302814}};
  for (const auto& want : table) {
    INFO("B(" << want.m << ", " << want.n << ")");
    Grade grade = figure_1();
    grade.banks_per_group = want.m;
    grade.rows = 1024;
    grade.cl = 2;
    grade.cwl = 1;
    grade.tras = 60;
    grade.trc = 64;  // a bank takes one row in that time, and the command bus any number of banks' rows
    DramConfig config = quiet(grade);
    config.rows = DramRows::closed;
    DrivenChannel driven(config);
    std::mt19937 random(1995);
    constexpr unsigned batches = 20'000;
    constexpr Clocks apart = 4096;
    for (unsigned batch = 0; batch < batches; ++batch) {
      for (unsigned i = 0; i < want.n; ++i) {
        driven.put({false, place(grade, static_cast<unsigned>(random() % want.m), i)}, batch * apart);
      }
    }
    driven.finish();
    std::vector<unsigned> hit(batches);
    for (const CommandRecord& command : driven.legal_log()) {
      if (command.command == DramCommand::activate && command.clock % apart < grade.trc)
        ++hit[command.clock / apart];
    }
    double sum = 0, sum_of_squares = 0;
    for (const unsigned count : hit) {
      sum += count;
      sum_of_squares += count * count;
    }
    const double mean = sum / batches;
    const double deviation = std::sqrt((sum_of_squares / batches - mean * mean) / batches);
    INFO("mean " << mean << ", 99 % confidence " << 2.576 * deviation);
    CHECK(want.hit == Approx(want.m * (1 - std::pow(1 - 1.0 / want.m, want.n))).epsilon(1e-6));
    CHECK(std::abs(mean - want.hit) < 2.576 * deviation);
    CHECK(2.576 * deviation < 0.01 * want.hit);
  }
}

}  // namespace earshot
