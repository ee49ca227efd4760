// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// DramCounts is what one DRAM channel did, or several together: whole numbers only, all since time 0.
// "Clocks" are those of the grade. Kernel-free.
#pragma once

#include <algorithm>
#include <cstdint>

#include "earshot/timing/exact_clock.h"

namespace earshot {

struct DramCounts {
  // Commands by what they do, auto-precharge and banks closed by a precharge-all included: one for each bank.
  std::uint64_t activates = 0;
  std::uint64_t precharges = 0;
  std::uint64_t read_bursts = 0;
  std::uint64_t write_bursts = 0;
  std::uint64_t refreshes = 0;       // all-bank, one for each rank and time
  std::uint64_t bank_refreshes = 0;  // per-bank

  // Bursts by what they found when they came to be served. Together read_bursts + write_bursts.
  std::uint64_t row_hits = 0;       // the row was open
  std::uint64_t row_closed = 0;     // the bank was precharged
  std::uint64_t row_conflicts = 0;  // another row was open

  // Bursts that cost no command.
  std::uint64_t reads_from_queue = 0;  // served from a write still queued
  std::uint64_t writes_merged = 0;     // into a write still queued

  std::uint64_t write_drains = 0;    // begun at the high mark
  std::uint64_t over_age = 0;        // commands that went first because of their request's age
  std::uint64_t most_postponed = 0;  // refreshes owed by one rank (by one bank, if per bank) at once

  Clocks elapsed = 0;                 // of one channel
  Clocks data_bus_busy = 0;           // sum over channels
  Clocks occupied = 0;                // with a request queued; sum over channels
  Clocks rank_clocks_active = 0;      // a row is open in the rank; sum over channels and ranks
  Clocks rank_clocks_precharged = 0;  // no row is open in the rank, refreshing included; likewise

  void add(const DramCounts& other) {
    activates += other.activates;
    precharges += other.precharges;
    read_bursts += other.read_bursts;
    write_bursts += other.write_bursts;
    refreshes += other.refreshes;
    bank_refreshes += other.bank_refreshes;
    row_hits += other.row_hits;
    row_closed += other.row_closed;
    row_conflicts += other.row_conflicts;
    reads_from_queue += other.reads_from_queue;
    writes_merged += other.writes_merged;
    write_drains += other.write_drains;
    over_age += other.over_age;
    most_postponed = std::max(most_postponed, other.most_postponed);
    elapsed = std::max(elapsed, other.elapsed);
    data_bus_busy += other.data_bus_busy;
    occupied += other.occupied;
    rank_clocks_active += other.rank_clocks_active;
    rank_clocks_precharged += other.rank_clocks_precharged;
  }
};

}  // namespace earshot
