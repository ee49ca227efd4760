// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Played is what a platform did from the start until all its players had played and everything they caused was done.
// What the flush at the end adds, for which no initiator waits, is apart from it.
#pragma once

#include <string>
#include <vector>

#include "platform.h"

namespace earshot {

// One queue, as it was.
struct MeteredQueue {
  std::string owner;   // the module's name: "bus", "cache2", "memory_ram"
  std::string name;
  QueueMeter meter;
  double unit_ps = 1;  // what it counts time in
};

struct Played {
  Picoseconds elapsed = 0;  // until the last player, bus transaction and memory access ended
  SnoopingBusTotals bus;
  std::vector<CacheTotals> caches;
  std::vector<Picoseconds> memory_busy;  // of the cached windows' memories
  std::vector<DramCounts> dram;          // likewise; of a plain memory, zeros
  std::vector<MeteredQueue> queues;      // arbitrated timing only
  std::uint64_t dirty_lines = 0;         // after the flush, if there is one
};

// Runs the simulation to its end, flush included, if the settings want one. Once per process.
// Throws Finding: a coherence violation, differing values, a stall, a player that never finishes. Throws UsageError if
// the workload does not fit the platform, and what else stopped the simulation.
Played play(const Settings& settings, Platform& platform);

// Every self-check that fails, now; each is a bug in the models.
std::vector<std::string> broken_laws(Platform& platform);

}  // namespace earshot
