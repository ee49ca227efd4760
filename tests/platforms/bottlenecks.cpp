// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>

#include "bottleneck.h"

using namespace earshot;

TEST_CASE("the busiest resource is the bottleneck, with its utilisation and demand", "[platforms]") {
  Load load;
  load.elapsed = 1000000;
  load.accesses = 1000;
  load.latency = 3000000;
  load.uncontended = 2000000;
  const Bottleneck found = find_bottleneck({{"bus", 300000}, {"memory", 400000}, {"other", 400000}}, load);
  CHECK(found.resource == "memory");
  CHECK(found.utilisation == Approx(0.4));
  CHECK(found.demand_ps == Approx(400));
  CHECK(found.initiators_at_work == Approx(3));
  CHECK(found.initiators_at_saturation == Approx(5));  // 2000 / 400
}

// E. D. Lazowska et al., Quantitative System Performance, 1984, section 5.4 (value from memory: the form of the
// example, a terminal system with demands of 5, 4, 3 s and a think time of 15 s; the bound N* = (D + Z) / Dmax).
TEST_CASE("the bounds of a terminal system meet at total demand and think time over the largest demand",
          "[platforms]") {
  Load load;
  load.accesses = 1;
  load.elapsed = 100;
  load.think = 15;
  load.latency = load.uncontended = 5 + 4 + 3;
  CHECK(find_bottleneck({{"processor", 5}, {"disk 1", 4}, {"disk 2", 3}}, load).initiators_at_saturation ==
        Approx(27.0 / 5));
}

TEST_CASE("latencies of accesses in flight at once overlap, think times do not", "[platforms]") {
  Load load;
  load.elapsed = 1000;
  load.accesses = 10;
  load.think = 10;
  load.latency = load.uncontended = 700;
  load.in_flight = 4;
  CHECK(find_bottleneck({{"bus", 50}}, load).initiators_at_saturation == Approx(4));  // (10 + 70) / 4 / 5
  load.in_flight = 16;
  CHECK(find_bottleneck({{"bus", 50}}, load).initiators_at_saturation ==
        Approx(2));  // 10 / 5: thinking is the limit
}

TEST_CASE("nothing that was busy has no bound", "[platforms]") {
  CHECK(find_bottleneck({{"bus", 0}}, Load{}).initiators_at_saturation == 0);
}
