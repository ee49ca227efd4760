// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Platform is the set of modules that a Settings describes, built and bound: players, caches, bus, memories.
// Construct it once per process, before simulation starts. sc_start() then returns when the last player has played
// all (see played.h for the rest of a run).
#pragma once

#include <memory>
#include <string>
#include <vector>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/coherent_cache.h"
#include "earshot/observe/coherence_monitor.h"
#include "earshot/traffic/non_blocking_player.h"
#include "earshot/traffic/player.h"
#include "packed_addresses.h"
#include "settings.h"
#include "window_memory.h"

namespace earshot {

class Platform {
 public:
  // Opens the recording: throws RecordingError. `table` is the protocol every cache runs.
  Platform(const Settings& settings, std::shared_ptr<const Table> table, const PlayerHooks& progress);

  std::vector<std::unique_ptr<CoherentCache>>& caches() { return caches_; }
  SnoopingBus& bus() { return *bus_; }
  // The memories of the cached windows.
  const std::vector<WindowMemory*>& cached_memories() const { return cached_memories_; }
  CoherenceMonitor* monitor() { return monitor_.get(); }         // null if nobody watches
  const RecordedOrder* recorded_order() const { return recorded_order_.get(); }  // null in concurrent order

  // When the last player finished; rethrows what stopped one early.
  Picoseconds finished_at() const;
  unsigned unfinished() const { return playing_; }  // who plays and has not played all
  // What players, bus and caches, memories wait for, a line each; empty if nothing is under way.
  std::string waiting() const { return players_waiting() + bus_->waiting() + memories_waiting(); }
  std::string players_waiting() const;
  std::string memories_waiting() const;

  // Has every cache write back what it owns when the simulation goes on; sc_start() returns when that is done.
  void request_flush() { flush_.notify(sc_core::SC_ZERO_TIME); }
  bool flushed() const { return flushed_; }

 private:
  void build_bus(const Settings& settings);
  void build_memories(const Settings& settings);
  void build_caches(const Settings& settings, const std::shared_ptr<const Table>& table);
  void build_players(const Settings& settings, PlayerHooks hooks);
  void build_recorded_order(const Settings& settings, const PlayerHooks& hooks);
  std::unique_ptr<AccessSource> stream(const Settings& settings, unsigned initiator) const;
  std::unique_ptr<AccessSource> placed(std::unique_ptr<AccessSource> source) const;
  void build_monitor(const Settings& settings);
  void flush();
  // What has an end: all that plays.
  template <typename Do>
  void for_each_end(Do what) const;

  std::unique_ptr<SnoopingBus> bus_;
  std::vector<std::unique_ptr<WindowMemory>> memories_;  // one a window
  std::vector<WindowMemory*> cached_memories_;
  std::vector<std::unique_ptr<CoherentCache>> caches_;
  std::unique_ptr<PackedAddresses> packed_;  // null: addresses are as recorded
  std::vector<std::unique_ptr<Player>> players_;
  std::vector<std::unique_ptr<NonBlockingPlayer>> non_blocking_players_;
  std::unique_ptr<RecordedOrder> recorded_order_;
  std::unique_ptr<CoherenceMonitor> monitor_;
  unsigned playing_ = 0;  // that have not finished
  sc_core::sc_event flush_{"flush"};
  bool flushed_ = false;
};

}  // namespace earshot
