// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An estimate of the energy that DRAM devices took, from what they did and the supply currents of their
// datasheet. Kernel-free.
//
// The method is that of Micron's technical notes TN-41-01 (DDR3) and TN-40-07 (DDR4), from memory: each
// operation costs what its current exceeds the standby current by, times voltage, times its duration; standby
// is IDD3N while a row is open in the rank, else IDD2N. Per device:
//
//     activate and precharge   (IDD0 tRC - IDD3N tRAS - IDD2N (tRC - tRAS)) VDD + (IPP0 - IPP3N) VPP tRC
//     read, write              (IDD4R - IDD3N) VDD, (IDD4W - IDD3N) VDD, each times the burst's duration
//     refresh                  ((IDD5B - IDD3N) VDD + (IPP5B - IPP3N) VPP) tRFC; of one bank: its share
//     background               (IDD3N or IDD2N) VDD + IPP3N VPP
//
// Datasheet currents are maxima over all parts. Not included: power-down, which is not modelled, and the
// pins' drivers and terminations, which depend on the board.
#pragma once

#include <string>

#include "earshot/dram/dram_counts.h"
#include "earshot/dram/grade.h"

namespace earshot {

struct EnergyEstimate {
  bool known = false;  // false: the rest is 0, and `note` says why
  double activate_pj = 0, read_pj = 0, write_pj = 0, refresh_pj = 0, background_pj = 0;
  std::string part;  // whose currents
  std::string note;  // that it is an estimate, and by which method

  double total_pj() const { return activate_pj + read_pj + write_pj + refresh_pj + background_pj; }
};

// `channel_bits`: data bits of one channel; 0: the grade's. REQUIRES: grade.problems() is empty.
EnergyEstimate estimate_energy(const Grade& grade, const DramCounts& counts, unsigned channel_bits = 0);

}  // namespace earshot
