// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/timeline.h"

#include <catch2/catch.hpp>
#include <random>

using namespace earshot;

TEST_CASE("a timeline gives every stretch to its part", "[timing]") {
  Timeline timeline(100);
  timeline.spend(LatencyPart::wait_for_grant, 110);
  timeline.spend(LatencyPart::transfer, 115);
  timeline.spend(LatencyPart::snoop, 120);
  timeline.spend(LatencyPart::memory_array, 160);
  timeline.spend(LatencyPart::wait_for_grant, 163);
  timeline.spend(LatencyPart::transfer, 183);
  CHECK(timeline.begin() == 100);
  CHECK(timeline.end() == 183);
  const LatencyParts parts = timeline.since(100);
  CHECK(parts[LatencyPart::wait_for_grant] == 13);
  CHECK(parts[LatencyPart::transfer] == 25);
  CHECK(parts[LatencyPart::snoop] == 5);
  CHECK(parts[LatencyPart::memory_array] == 40);
  CHECK(parts.total() == 83);
}

TEST_CASE("one that joins on the way is charged what is left from there on", "[timing]") {
  Timeline timeline(100);
  timeline.spend(LatencyPart::snoop, 120);
  timeline.spend(LatencyPart::memory_array, 160);
  timeline.spend(LatencyPart::transfer, 183);
  CHECK(timeline.since(110)[LatencyPart::snoop] == 10);
  CHECK(timeline.since(120)[LatencyPart::snoop] == 0);
  CHECK(timeline.since(120)[LatencyPart::memory_array] == 40);
  CHECK(timeline.since(150)[LatencyPart::memory_array] == 10);
  CHECK(timeline.since(150).total() == 33);
  CHECK(timeline.since(183).total() == 0);
}

TEST_CASE("a stretch of no length takes none of the timeline's room", "[timing]") {
  Timeline timeline(5);
  for (int i = 0; i < 1000; ++i) timeline.spend(LatencyPart::wait_for_grant, 5);
  timeline.spend(LatencyPart::hit, 6);
  CHECK(timeline.since(5).total() == 1);
}

TEST_CASE("what any stretch of a timeline was spent on agrees with a count picosecond by picosecond",
          "[timing]") {
  std::mt19937 random(1);  // seed 1; only its raw output is used, which the standard fixes
  for (int round = 0; round < 200; ++round) {
    const Picoseconds begin = random() % 50;
    Timeline timeline(begin);
    std::vector<LatencyPart> of(begin);  // the part of each picosecond
    for (auto steps = random() % 11; steps > 0; --steps) {
      const auto part = static_cast<LatencyPart>(random() % latency_parts);
      const Picoseconds until = timeline.end() + random() % 8;
      timeline.spend(part, until);
      of.resize(until, part);
    }
    REQUIRE(timeline.end() == of.size());
    for (Picoseconds since = begin; since <= timeline.end(); ++since) {
      LatencyParts counted;
      for (Picoseconds ps = since; ps < of.size(); ++ps) ++counted[of[ps]];
      REQUIRE(timeline.since(since).ps == counted.ps);
      REQUIRE(timeline.since(since).total() == timeline.end() - since);
    }
  }
}
