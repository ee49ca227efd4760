// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/rounding.h"

namespace earshot {

Clocks clocks_at_least(Picoseconds time, const ExactClock& clock, Rounding rounding) {
  const Picoseconds printed_period = clock.picoseconds / clock.clocks;
  if (rounding == Rounding::exact || printed_period == 0) return clock.edge_at_or_after(time);
  if (rounding == Rounding::ddr4) return (1000 * time / printed_period + 974) / 1000;
  return (997 * time / printed_period + 1000) / 1000;
}

Clocks clocks_at_most(Picoseconds time, const ExactClock& clock) {
  using Wide = unsigned __int128;
  return static_cast<Clocks>(Wide{time} * clock.clocks / clock.picoseconds);
}

}  // namespace earshot
