// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/calendar.h"

#include <catch2/catch.hpp>
#include <random>
#include <set>

using namespace earshot;

TEST_CASE("a booking takes the earliest gap that fits, not the end of the queue", "[timing]") {
  Calendar calendar;
  CHECK(calendar.book(10, 10) == 10);
  CHECK(calendar.book(30, 10) == 30);
  CHECK(calendar.book(12, 11) == 40);  // the gap [20,30) is too short
  CHECK(calendar.book(12, 10) == 20);
  CHECK(calendar.book(0, 10) == 0);    // an earlier local time, and the timetable has room
  CHECK(calendar.book(0, 1) == 51);
  CHECK(calendar.busy_time() == 52);
  CHECK(calendar.last_end() == 52);
}

TEST_CASE("a booking of no length takes no time", "[timing]") {
  Calendar calendar;
  calendar.book(0, 10);
  CHECK(calendar.book(5, 0) == 5);
  CHECK(calendar.busy_time() == 10);
}

TEST_CASE("a burst of n equal requests waits 0, S, 2S, ...", "[timing]") {
  Calendar calendar;
  for (Picoseconds i = 0; i < 20; ++i) CHECK(calendar.book(1000, 7) - 1000 == i * 7);
}

TEST_CASE("random bookings agree with a timetable of single slots", "[timing]") {
  // The oracle marks every busy unit of time in a set and tries each start in turn.
  std::mt19937 random(1);  // seed 1; only its raw output is used, which the standard fixes
  for (int round = 0; round < 20; ++round) {
    Calendar calendar;
    std::set<Picoseconds> busy;
    Picoseconds forgotten = 0;
    for (int i = 0; i < 200; ++i) {
      const Picoseconds ready = forgotten + random() % 300;
      const Picoseconds duration = 1 + random() % 9;
      Picoseconds start = ready;
      const auto fits = [&] {
        for (Picoseconds t = start; t < start + duration; ++t)
          if (busy.count(t) != 0) return false;
        return true;
      };
      while (!fits()) ++start;
      for (Picoseconds t = start; t < start + duration; ++t) busy.insert(t);
      REQUIRE(calendar.book(ready, duration) == start);
      if (i % 10 == 9) calendar.forget_before(forgotten += random() % 60);
    }
    CHECK(calendar.busy_time() == busy.size());
  }
}
