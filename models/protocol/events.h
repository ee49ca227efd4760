// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The vocabulary that protocols, caches and buses share: what a processor or the bus asks of a cached line,
// and the kinds of bus transaction. Pure C++, usable from any thread.
#pragma once

#include <cstdint>

namespace earshot {

// The kinds of transaction a snooping bus carries. The order is the order of every report.
enum class BusKind : std::uint8_t {
  read,            // fetch a line to read it
  read_exclusive,  // fetch a line to write it: every other copy is told
  upgrade,         // ask for the right to write a line already held: address only
  update,          // broadcast a written word to the other copies; memory does not take it
  write_through,   // broadcast a written word; memory takes it too
  write_back,      // the owner's line goes to memory on replacement; not snooped
  io_read,         // read by an I/O port, which keeps no copy, or of an uncached window
  io_write,        // write by an I/O port, or of an uncached window
};
constexpr int bus_kinds = 8;

// What can happen to one line in one cache. The first three come from the processor side, the others are
// somebody else's transaction seen on the bus.
enum class Event : std::uint8_t {
  read,                  // the processor reads the line
  write,                 // the processor writes (part of) the line
  replace,               // the line must make room
  snoop_read,            // another cache's BusKind::read
  snoop_read_exclusive,  // another cache's BusKind::read_exclusive
  snoop_upgrade,         // another cache's BusKind::upgrade
  snoop_update,          // another cache's BusKind::update
  snoop_write_through,   // another cache's BusKind::write_through
  snoop_io_read,         // an I/O port's BusKind::io_read
  snoop_io_write,        // an I/O port's BusKind::io_write
};
constexpr int events = 10;

// The names used in tables, reports and JSON: "read-exclusive", "snoop-update".
const char* name_of(BusKind kind);
const char* name_of(Event event);

// The event other caches see for a snooped kind. REQUIRES: `kind` is not write_back, which nobody sees.
constexpr Event snoop_event(BusKind kind) {
  const int unseen = kind > BusKind::write_back ? 1 : 0;
  return static_cast<Event>(static_cast<int>(Event::snoop_read) + static_cast<int>(kind) - unseen);
}

}  // namespace earshot
