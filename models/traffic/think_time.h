// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What passes in an initiator before each access: always the same, or spread evenly around it. Initiators that think
// equally long fall into a rhythm with each other that no program has; a spread breaks it. Seeded, the same on every
// machine.
#pragma once

#include <systemc>

#include "earshot/timing/picoseconds.h"
#include "earshot/traffic/seeded_random.h"

namespace earshot {

class ThinkTime {
 public:
  ThinkTime(sc_core::sc_time mean) : mean_(mean) {}  // always `mean`
  // Within `percent` of the mean on either side. REQUIRES: percent <= 100.
  ThinkTime(sc_core::sc_time mean, unsigned percent, std::uint64_t seed)
      : mean_(mean), spread_(to_ps(mean) * percent / 100), random_(seed) {}

  sc_core::sc_time next() {
    if (spread_ == 0) return mean_;
    return from_ps(to_ps(mean_) - spread_ + random_.next() % (2 * spread_ + 1));
  }

 private:
  sc_core::sc_time mean_;
  Picoseconds spread_ = 0;
  SplitMix64 random_{0};
};

}  // namespace earshot
