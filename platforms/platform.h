// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Platform is the set of modules that a Settings describes, built and bound: players, caches, bus, memories.
// Construct it once per process, before simulation starts.
#pragma once

#include <memory>
#include <vector>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/coherent_cache.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/observe/coherence_monitor.h"
#include "earshot/traffic/player.h"
#include "settings.h"

namespace earshot {

class Platform {
 public:
  // Opens the recording: throws RecordingError. `table` is the protocol every cache runs.
  Platform(const Settings& settings, std::shared_ptr<const Table> table, const PlayerHooks& progress);

  std::vector<std::unique_ptr<CoherentCache>>& caches() { return caches_; }
  SnoopingBus& bus() { return *bus_; }
  // The memories of the cached windows.
  const std::vector<PlainMemory*>& cached_memories() const { return cached_memories_; }
  CoherenceMonitor* monitor() { return monitor_.get(); }         // null if nobody watches
  const RecordedOrder* recorded_order() const { return recorded_order_.get(); }  // null in concurrent order

  // When the last player finished; rethrows what stopped one early.
  Picoseconds finished_at() const;

 private:
  void build_memories(const Settings& settings);
  void build_caches(const Settings& settings, const std::shared_ptr<const Table>& table);
  void build_players(const Settings& settings, PlayerHooks hooks);

  std::unique_ptr<SnoopingBus> bus_;
  std::vector<std::unique_ptr<PlainMemory>> memories_;  // one a window
  std::vector<PlainMemory*> cached_memories_;
  std::vector<std::unique_ptr<CoherentCache>> caches_;
  std::vector<std::unique_ptr<Player>> players_;
  std::unique_ptr<RecordedOrder> recorded_order_;
  std::unique_ptr<CoherenceMonitor> monitor_;
};

}  // namespace earshot
