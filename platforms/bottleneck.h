// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Which resource of a platform saturates first, and when, by the laws of operational analysis (P. J. Denning and J. P.
// Buzen, "The operational analysis of queueing network models", Computing Surveys 10(3), 1978; E. D. Lazowska et al.,
// "Quantitative System Performance", 1984, chapters 3 and 5). They hold for what was measured, whatever the
// distributions: a resource's utilisation is throughput times its demand, the time each access needs it for. With N
// accesses in the system, each thinking for Z between R of uncontended latency, throughput is at most
//     min(1 / Dmax, N / (R + Z)),
// Dmax being the largest demand: the two bounds meet where N* = (R + Z) / Dmax. Kernel-free.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

struct Resource {
  std::string name;       // "data bus", "memory"
  Picoseconds busy = 0;
};

// What was measured.
struct Load {
  Picoseconds elapsed = 0;
  std::uint64_t accesses = 0;
  Picoseconds latency = 0;       // the sum of all accesses' latencies
  Picoseconds uncontended = 0;   // of that: without what they waited for each other
  Picoseconds think = 0;         // before each access
  unsigned in_flight = 1;        // accesses of one initiator at once
};

struct Bottleneck {
  std::string resource;
  double utilisation = 0;
  double demand_ps = 0;                 // for each access
  double initiators_at_work = 0;        // at once, on average: throughput times R + Z (Little's law)
  double initiators_at_saturation = 0;  // N*, in initiators; 0: nothing was busy
};

// REQUIRES: there is a resource. Of equally busy ones the first.
Bottleneck find_bottleneck(const std::vector<Resource>& resources, const Load& load);

}  // namespace earshot
