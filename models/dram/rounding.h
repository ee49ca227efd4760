// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// From the times of a datasheet to whole clocks. A minimum is rounded up, a maximum down. Kernel-free.
//
// The question is which period a time is divided by. A 1200 MHz clock's is 833.33.. ps; datasheets print
// 0.833, and a plain division by that makes one clock too many of 5 ns (7 for 6). JEDEC's remedy is to
// forgive a little when rounding up ("rounding algorithms" of JESD79-4B section 13.5 and JESD79-5
// section 13.2, both from memory). Dividing by the exact period needs no remedy and never gives less than the
// time asked for.
#pragma once

#include "earshot/timing/exact_clock.h"

namespace earshot {

enum class Rounding {
  exact,  // by the exact period
  ddr4,   // by the period in whole ps, forgiving 2.5 % of a clock
  ddr5,   // by the period in whole ps, forgiving 0.3 % of the time
};

// REQUIRES of both: the clock's fields are not 0.
Clocks clocks_at_least(Picoseconds time, const ExactClock& clock, Rounding rounding);
Clocks clocks_at_most(Picoseconds time, const ExactClock& clock);

}  // namespace earshot
