// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A PresenceIndex knows which caches hold which line, so that a transaction need only visit those. It is
// bookkeeping of the host program: the modelled bus still asks every cache, and time and counts are the same
// without it. Open addressing with linear probing and backward-shift deletion (D. E. Knuth, The Art of
// Computer Programming vol. 3, 6.4, algorithm R). Kernel-free.
#pragma once

#include <cstdint>
#include <vector>

namespace earshot {

class PresenceIndex {
 public:
  using Mask = std::uint64_t;  // bit p: the cache at bus port p holds the line

  PresenceIndex() : slots_(64) {}

  Mask holders(std::uint64_t line) const {
    for (std::size_t i = home(line);; i = next(i)) {
      if (slots_[i].mask == 0) return 0;
      if (slots_[i].line == line) return slots_[i].mask;
    }
  }
  void add(std::uint64_t line, int port);
  void remove(std::uint64_t line, int port);
  std::size_t lines() const { return used_; }

 private:
  struct Slot {
    std::uint64_t line = 0;
    Mask mask = 0;  // 0: the slot is free
  };
  std::size_t home(std::uint64_t line) const {  // Fibonacci hashing, Knuth 6.4
    return static_cast<std::size_t>((line * 0x9E3779B97F4A7C15u) >> shift_);
  }
  std::size_t next(std::size_t i) const { return (i + 1) & (slots_.size() - 1); }
  void grow();

  std::vector<Slot> slots_;  // a power of two of them, at most half in use
  unsigned shift_ = 58;      // 64 - log2(slots_.size())
  std::size_t used_ = 0;
};

}  // namespace earshot
