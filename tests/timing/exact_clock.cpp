// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/exact_clock.h"

#include <catch2/catch.hpp>
#include <random>

using namespace earshot;

namespace {

// Memory clocks of the JEDEC standards, in MHz as a fraction: `clocks` in `picoseconds`.
const std::vector<ExactClock> clocks = {
    {1, 1250},            // 800 MHz
    {15, 14063},          // no round number
    {6, 5000},            // 1200 MHz
    {1, 625},             // 1600 MHz
    {12, 5000},           // 2400 MHz
    {32, 15000},          // 2133 1/3 MHz
    {1, 1},      {7, 3},  // edges closer than a picosecond fall together
};

}  // namespace

TEST_CASE("1200 MHz has its edges at 0, 833, 1666 and 2500 ps", "[timing]") {
  const ExactClock clock{6, 5000};
  const std::vector<Picoseconds> edges = {0, 833, 1666, 2500, 3333, 4166, 5000, 5833};
  for (std::size_t n = 0; n < edges.size(); ++n) CHECK(clock.edge(n) == edges[n]);
}

TEST_CASE("a clock does not drift within 10^12 periods", "[timing]") {
  constexpr Clocks many = 1000000000000;
  CHECK(ExactClock{6, 5000}.edge(many) == 833333333333333);
  CHECK(ExactClock{6, 5000}.edge(6 * many) == 5000 * many);
  CHECK(ExactClock{12, 5000}.edge(12 * many) == 5000 * many);
  CHECK(ExactClock{6, 5000}.edge_at_or_after(5000 * many) == 6 * many);
  CHECK(ExactClock{6, 5000}.edge_at_or_after(5000 * many + 1) == 6 * many + 1);
}

TEST_CASE("a clock reaches the last picosecond of simulation time", "[timing]") {
  const Picoseconds last = ~Picoseconds{0};  // three divides it
  CHECK(ExactClock{5, 6}.edge(last / 6 * 5) == last / 6 * 6);
  CHECK(ExactClock{1, 3}.edge(last / 3) == last);
  CHECK(ExactClock{1, 3}.edge_at_or_after(last) == last / 3);
}

TEST_CASE("every edge is within a picosecond of where the exact clock has it", "[timing]") {
  std::mt19937_64 random(1);  // seed 1; only its raw output is used, which the standard fixes
  for (const ExactClock& clock : clocks)
    for (int i = 0; i < 1000; ++i) {
      const Clocks n = random() >> 24;
      const auto exact = static_cast<unsigned __int128>(n) * clock.picoseconds;  // times `clocks`
      const auto edge = static_cast<unsigned __int128>(clock.edge(n)) * clock.clocks;
      REQUIRE((edge <= exact && exact < edge + clock.clocks));
    }
}

TEST_CASE("the edge at or after a time is the first one that is not before it", "[timing]") {
  std::mt19937_64 random(2);
  for (const ExactClock& clock : clocks) {
    CHECK(clock.edge_at_or_after(0) == 0);
    for (int i = 0; i < 2000; ++i) {
      const Picoseconds time = 1 + (random() >> (20 + random() % 40));
      const Clocks n = clock.edge_at_or_after(time);
      REQUIRE(clock.edge(n) >= time);
      REQUIRE(clock.edge(n - 1) < time);
    }
  }
}
