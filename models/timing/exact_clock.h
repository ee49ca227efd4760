// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An ExactClock is a clock whose period need not be a whole number of picoseconds: `clocks` of its periods last
// exactly `picoseconds`. Edge n is at floor(n * picoseconds / clocks), so rounding never accumulates: 1200 MHz
// is 6 clocks in 5000 ps, with edges at 0, 833, 1666, 2500 ps. Kernel-free.
#pragma once

#include <cstdint>

#include "earshot/timing/picoseconds.h"

namespace earshot {

using Clocks = std::uint64_t;  // a number of periods, or of an edge

struct ExactClock {
  std::uint64_t clocks = 1;       // both at least 1
  Picoseconds picoseconds = 1000;

  Picoseconds edge(Clocks n) const {
    Picoseconds product = 0;  // a division of 128 bits costs several times one of 64
    if (!__builtin_mul_overflow(n, picoseconds, &product)) return product / clocks;
    return static_cast<Picoseconds>(Wide{n} * picoseconds / clocks);
  }
  // The number of the first edge at or after `time`.
  Clocks edge_at_or_after(Picoseconds time) const {
    Picoseconds sum = 0;
    if (!__builtin_mul_overflow(time, clocks, &sum) && !__builtin_add_overflow(sum, picoseconds - 1, &sum))
      return sum / picoseconds;
    return static_cast<Clocks>((Wide{time} * clocks + picoseconds - 1) / picoseconds);
  }

 private:
  __extension__ typedef unsigned __int128 Wide;
};

}  // namespace earshot
