// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Latency of one read at an idle device, from the command to the data: hit CL, closed tRCD + CL, conflict
// tRP + tRCD + CL, and BL/2 more to the end of the last beat. The inputs are those of the grades, whose
// sources stand in models/dram/grades/ (DDR5's are from memory); the sums are own arithmetic.
#include <catch2/catch.hpp>

#include "outside/dram_drive.h"

namespace earshot {
namespace {

struct Latencies {
  const char* name;
  Clocks hit, closed, conflict;  // to the first beat
  Picoseconds hit_ps, closed_ps, conflict_ps;
  Picoseconds hit_last_ps, closed_last_ps, conflict_last_ps;
};

// A third of a ps down, as edges are.
const Latencies table[] = {
    {"ddr3-1600k", 11, 22, 33, 13750, 27500, 41250, 18750, 32500, 46250},
    {"ddr4-2400r", 16, 32, 48, 13333, 26666, 40000, 16666, 30000, 43333},
    {"ddr4-2400t", 17, 34, 51, 14166, 28333, 42500, 17500, 31666, 45833},
    {"ddr4-3200aa", 22, 44, 66, 13750, 27500, 41250, 16250, 30000, 43750},
    {"lpddr4-3200", 28, 57, 86, 17500, 35625, 53750, 22500, 40625, 58750},
    {"ddr5-4800b", 40, 79, 118, 16666, 32916, 49166, 20000, 36250, 52500},
};

}  // namespace

TEST_CASE("An idle device answers hits, closed banks and conflicts after the standards' latencies",
          "[outside][dram]") {
  for (const Latencies& want : table) {
    for (const DramScheduling scheduling :
         {DramScheduling::one_at_a_time, DramScheduling::first_come, DramScheduling::first_ready}) {
      INFO(want.name);
      const Grade grade = load_grade(want.name);
      const Clocks burst = grade.burst_clocks();
      DramConfig config = quiet(grade);
      config.scheduling = scheduling;
      DrivenChannel driven(config);
      const Clocks closed = driven.latency({false, place(grade, 1, 7)}, 100) - burst;
      const Clocks hit = driven.latency({false, place(grade, 1, 7, 3)}, 1000) - burst;
      const Clocks conflict = driven.latency({false, place(grade, 1, 8)}, 2000) - burst;
      driven.legal_log();
      CHECK(hit == want.hit);
      CHECK(closed == want.closed);
      CHECK(conflict == want.conflict);
      CHECK(grade.clock.edge(hit) == want.hit_ps);
      CHECK(grade.clock.edge(closed) == want.closed_ps);
      CHECK(grade.clock.edge(conflict) == want.conflict_ps);
      CHECK(grade.clock.edge(hit + burst) == want.hit_last_ps);
      CHECK(grade.clock.edge(closed + burst) == want.closed_last_ps);
      CHECK(grade.clock.edge(conflict + burst) == want.conflict_last_ps);
    }
  }
}

TEST_CASE("A conflict with a row opened a moment ago waits for tRAS first", "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const Grade grade = load_grade(name);
    DrivenChannel driven(quiet(grade));
    const Clocks opened = 100;
    driven.put({false, place(grade, 0, 7)}, opened);
    const Clocks age = grade.trcd + 2;  // the read has gone, at tRCD
    const unsigned next = driven.put({false, place(grade, 0, 8)}, opened + age);
    driven.finish();
    driven.legal_log();
    const Clocks close = std::max<Clocks>(grade.tras, grade.trcd + grade.trtp);
    CHECK(driven.done(next) == opened + close + grade.trp + grade.trcd + grade.cl + grade.burst_clocks());
  }
}

TEST_CASE("A conflict with a row written a moment ago waits until that is written", "[outside][dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const Grade grade = load_grade(name);
    DrivenChannel driven(quiet(grade));
    driven.put({true, place(grade, 0, 7)}, 100);
    const unsigned next = driven.put({false, place(grade, 0, 8)}, 100 + grade.trcd + 2);
    driven.finish();
    driven.legal_log();
    const Clocks written = 100 + grade.trcd + grade.cwl + grade.burst_clocks() + grade.twr;
    CHECK(driven.done(next) == written + grade.trp + grade.trcd + grade.cl + grade.burst_clocks());
  }
}

}  // namespace earshot
