// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/energy.h"

namespace earshot {

EnergyEstimate estimate_energy(const Grade& grade, const DramCounts& counts, unsigned channel_bits) {
  const SupplyCurrents& i = grade.currents;
  EnergyEstimate result;
  if (i.part.empty()) {
    result.note = "no estimate: the supply currents of a part of " + grade.name + " with " +
                  std::to_string(grade.density_gbit) + " Gbit and " + std::to_string(grade.device_bits) +
                  " data bits are not known";
    return result;
  }
  result.known = true;
  result.part = i.part;
  result.note =
      "an estimate from the datasheet's largest currents, by the method of Micron TN-41-01 and TN-40-07, "
      "without power-down, drivers and terminations";

  // mA times V times ns is pJ.
  const double vdd = i.vdd_mv / 1000.0, vpp = i.vpp_mv / 1000.0;
  const double period =
      static_cast<double>(grade.clock.picoseconds) / static_cast<double>(grade.clock.clocks) / 1000;
  const double bits = channel_bits == 0 ? grade.channel_bits : channel_bits;
  const double clock = period * bits / grade.device_bits;  // times the devices that do it together

  const double bank_cycle =
      (i.idd0 * grade.trc - i.idd3n * grade.tras - i.idd2n * (grade.trc - grade.tras)) * vdd +
      (i.ipp0 - i.ipp3n) * vpp * grade.trc;
  const double refresh = ((i.idd5b - i.idd3n) * vdd + (i.ipp5b - i.ipp3n) * vpp) * grade.trfc;
  const double refreshes =
      static_cast<double>(counts.refreshes) + static_cast<double>(counts.bank_refreshes) / grade.banks();
  const double active = i.idd3n * vdd + i.ipp3n * vpp;
  const double precharged = i.idd2n * vdd + i.ipp3n * vpp;

  result.activate_pj = static_cast<double>(counts.activates) * bank_cycle * clock;
  result.read_pj =
      static_cast<double>(counts.read_bursts) * (i.idd4r - i.idd3n) * vdd * grade.burst_clocks() * clock;
  result.write_pj =
      static_cast<double>(counts.write_bursts) * (i.idd4w - i.idd3n) * vdd * grade.burst_clocks() * clock;
  result.refresh_pj = refreshes * refresh * clock;
  result.background_pj = (static_cast<double>(counts.rank_clocks_active) * active +
                          static_cast<double>(counts.rank_clocks_precharged) * precharged) *
                         clock;
  return result;
}

}  // namespace earshot
