// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/queue_meter.h"

#include <catch2/catch.hpp>
#include <random>
#include <vector>

using namespace earshot;

TEST_CASE("a queue's numbers are those counted by hand", "[timing]") {
  // Present: 0 in [0,10), 1 in [10,14), 2 in [14,20), 1 in [20,30), 0 after.
  QueueMeter meter;
  meter.enter(10);
  meter.enter(14);
  meter.leave(20, 10);
  meter.leave(30, 14);
  CHECK(meter.arrivals() == 2);
  CHECK(meter.present() == 0);
  CHECK(meter.most() == 2);
  CHECK(meter.longest() == 16);
  CHECK(meter.mean_stay() == Approx(13));
  CHECK(meter.mean_present(40) == Approx((4 + 2 * 6 + 10) / 40.0));
  CHECK(meter.littles_law_holds(30));
  CHECK(meter.littles_law_holds(1000));
}

TEST_CASE("those still present count as far as they have come", "[timing]") {
  QueueMeter meter;
  meter.enter(10);
  meter.enter(10);
  meter.leave(15, 10);
  CHECK(meter.present() == 1);
  CHECK(meter.mean_stay() == Approx(5));
  CHECK(meter.mean_present(20) == Approx((5 * 2 + 5) / 20.0));
  CHECK(meter.littles_law_holds(20));
}

TEST_CASE("an unused queue is empty and keeps the law", "[timing]") {
  const QueueMeter meter;
  CHECK(meter.mean_present(0) == 0);
  CHECK(meter.mean_present(10) == 0);
  CHECK(meter.mean_stay() == 0);
  CHECK(meter.littles_law_holds(0));
  CHECK(meter.littles_law_holds(10));
}

TEST_CASE("Little's law holds for any sequence of entering and leaving, in any order of service",
          "[timing]") {
  std::mt19937_64 random(1);  // seed 1; only its raw output is used, which the standard fixes
  for (int round = 0; round < 50; ++round) {
    QueueMeter meter;
    std::vector<Picoseconds> present;
    Picoseconds now = round % 2 == 0 ? 0 : Picoseconds{1} << 62;  // also late in the longest simulation
    double area = 0, stayed = 0;
    std::uint64_t left = 0;
    std::size_t most = 0;
    Picoseconds longest = 0;
    const Picoseconds start = now;
    for (int i = 0; i < 1000; ++i) {
      const Picoseconds step = random() % 3 == 0 ? 0 : random() % (Picoseconds{1} << (random() % 50));
      area += static_cast<double>(present.size()) * static_cast<double>(step);
      now += step;
      if (present.empty() || random() % 100 < 52) {
        meter.enter(now);
        present.push_back(now);
        most = std::max(most, present.size());
      } else {
        const std::size_t who = random() % present.size();
        meter.leave(now, present[who]);
        stayed += static_cast<double>(now - present[who]);
        longest = std::max(longest, now - present[who]);
        ++left;
        present[who] = present.back();
        present.pop_back();
      }
      REQUIRE(meter.littles_law_holds(now));
      REQUIRE(meter.littles_law_holds(now + random() % 1000));
    }
    CHECK(meter.present() == present.size());
    CHECK(meter.most() == most);
    CHECK(meter.longest() == longest);
    CHECK(meter.mean_stay() * static_cast<double>(left) == Approx(stayed));
    if (start == 0) CHECK(meter.mean_present(now) * static_cast<double>(now) == Approx(area));
  }
}

TEST_CASE("a meter that lost its place does not keep Little's law", "[timing]") {
  QueueMeter meter;
  meter.enter(10);
  SECTION("somebody left twice") {
    meter.leave(20, 10);
    meter.leave(20, 10);
  }
  SECTION("somebody left before having come") {
    meter.leave(20, 25);
  }
  SECTION("somebody's coming was remembered wrongly") {
    meter.leave(20, 15);
  }
  SECTION("time went back") {
    meter.enter(20);
    meter.enter(15);
  }
  CHECK_FALSE(meter.littles_law_holds(30));
}
