// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Settings are everything a run needs to know, read from an INI file and the command line, which take the same
// keys; the command line wins. Every problem of a stage is reported at once, with its place: what is written, then
// what its parts come to together and what they name (the table, the recording).
#pragma once

#include <memory>
#include <stdexcept>
#include <string>
#include <utility>
#include <vector>

#include "earshot/bus/address_map.h"
#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/geometry.h"
#include "earshot/dram/dram_config.h"
#include "earshot/protocol/table.h"
#include "earshot/timing/picoseconds.h"
#include "earshot/traffic/pattern.h"

namespace earshot {

// Unusable input: exit status 2. what() may have several lines, one a problem.
class UsageError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

enum class Order { recorded, concurrent };
enum class MemoryKind { plain, dram };
enum class Watch { where_recorded, always, never };  // the coherence monitor

struct Settings {
  BusTiming timing = BusTiming::annotated;

  // bus
  BusStructure structure = BusStructure::split;
  Picoseconds bus_clock = 5000;
  unsigned bus_width = 0;
  unsigned arbitration_cycles = 0, address_cycles = 0, snoop_cycles = 0, supply_cycles = 0, turnaround_cycles = 0;
  ArbiterConfig arbiter;
  unsigned bus_outstanding = 1;
  std::uint64_t stall_cycles = 0;
  Picoseconds longest_wait = 0;   // for a grant, until it is a finding; 0: no limit
  std::vector<Window> windows;

  // caches
  unsigned caches = 0;
  std::string protocol;           // a built-in table's name, or the path of a table file
  int update_limit = 0;           // 0: as the table says
  std::shared_ptr<const Table> table;  // the protocol, loaded; not yet proved
  Geometry geometry;
  Picoseconds hit_time = 0;
  unsigned misses = 1, write_back_slots = 1;

  // memory
  MemoryKind memory_kind = MemoryKind::plain;
  Picoseconds read_latency = 0, write_latency = 0, beat_time = 0;  // plain, and uncached windows
  unsigned beat_bytes = 0;
  std::string grade;              // a built-in grade's name, or the path of a grade file
  unsigned density = 0, device_width = 0;
  DramConfig dram;                // its grade is loaded if memory_kind is dram
  std::string command_log;        // path; empty for none

  // workload
  std::string recording;          // path; empty for a pattern
  bool uses_pattern = false;
  PatternConfig pattern;
  Order order = Order::recorded;
  bool packed = false;            // addresses of a recording: see PackedAddresses
  unsigned in_flight = 1;         // accesses of an initiator
  Picoseconds think = 0;
  unsigned think_spread = 0;      // percent
  Picoseconds quantum = 0;

  // the run
  Watch monitor = Watch::where_recorded;
  bool flush_at_end = true;
  bool baseline = true;

  // Every key with the text it ended up with, in the order of the help text.
  std::vector<std::pair<std::string, std::string>> resolved;

  bool watched() const {
    return monitor == Watch::always || (monitor == Watch::where_recorded && order == Order::recorded);
  }
};

// `arguments`: "--section.key=value" or "--section.key value", and nothing else. `config`: the path of a file, the name
// of a shipped one, or empty. Throws UsageError.
Settings read_settings(const std::string& config, const std::vector<std::string>& arguments);

// One line a key: name, what it is, its default.
std::string settings_help();

}  // namespace earshot
