// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An Observer is told what caches and buses do; it never steers. Modules hold a pointer to one, null when
// nobody watches, which then costs a test of that pointer. Called from the process that performs the access,
// at the instant the access takes effect. Bytes are valid during the call only, a State as long as its Table.
#pragma once

#include <cstddef>
#include <cstdint>

#include "earshot/protocol/table.h"

namespace earshot {

class Observer {
 public:
  virtual ~Observer() = default;

  // The processor side of cache `port` read or wrote bytes [address, address + length), all in one line.
  virtual void accessed(int port, bool write, std::uint64_t address, const std::uint8_t* bytes,
                        std::size_t length) = 0;

  // The copy of the line at `line` in cache `port` went from one state to another.
  virtual void changed(int port, std::uint64_t line, const State& from, const State& to) = 0;

  // Everything that belongs to the last access of the line at `line` is done: copies and memory are final.
  virtual void settled(std::uint64_t line) = 0;

  // A debugger wrote bytes [address, address + length) of every copy and of memory.
  virtual void poked(std::uint64_t address, const std::uint8_t* bytes, std::size_t length) = 0;
};

}  // namespace earshot
