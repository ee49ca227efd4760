// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/events.h"

namespace earshot {

const char* name_of(BusKind kind) {
  switch (kind) {
    case BusKind::read:           return "read";
    case BusKind::read_exclusive: return "read-exclusive";
    case BusKind::upgrade:        return "upgrade";
    case BusKind::update:         return "update";
    case BusKind::write_through:  return "write-through";
    case BusKind::write_back:     return "write-back";
    case BusKind::io_read:        return "io-read";
    case BusKind::io_write:       return "io-write";
  }
  return "?";
}

const char* name_of(Event event) {
  switch (event) {
    case Event::read:                 return "read";
    case Event::write:                return "write";
    case Event::replace:              return "replace";
    case Event::snoop_read:           return "snoop-read";
    case Event::snoop_read_exclusive: return "snoop-read-exclusive";
    case Event::snoop_upgrade:        return "snoop-upgrade";
    case Event::snoop_update:         return "snoop-update";
    case Event::snoop_write_through:  return "snoop-write-through";
    case Event::snoop_io_read:        return "snoop-io-read";
    case Event::snoop_io_write:       return "snoop-io-write";
  }
  return "?";
}

}  // namespace earshot
