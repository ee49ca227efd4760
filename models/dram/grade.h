// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Grade is what the scheduler knows about one kind of DRAM device at one speed: its clock, its organisation, and
// its timing parameters in whole clocks, already rounded as JEDEC says. Parameter names are those of the JEDEC
// standards (JESD79-3, -4, -5, JESD209-4). Kernel-free.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "earshot/timing/exact_clock.h"

namespace earshot {

// Where one parameter's value comes from.
struct GradeSource {
  std::string parameter;  // "tRCD"
  std::string written;    // as the source has it: "13.75 ns", "max(4 nCK, 7.5 ns)"
  std::string source;     // standard or datasheet, and table or page
  bool read = false;      // false: from memory
};

// Datasheet supply currents in mA and voltages in mV, for the energy estimate; all zero if the part is not known.
struct SupplyCurrents {
  std::string part;       // the datasheet
  unsigned vdd_mv = 0, vpp_mv = 0;
  double idd0 = 0, idd2n = 0, idd3n = 0, idd4r = 0, idd4w = 0, idd5b = 0;
  double ipp0 = 0, ipp3n = 0, ipp5b = 0;
};

struct Grade {
  std::string name;        // "ddr4-2400t"
  std::string standard;    // "JESD79-4"
  ExactClock clock;        // of commands; data moves on both edges

  // One device.
  unsigned density_gbit = 0;   // of one channel, for LPDDR4
  unsigned device_bits = 0;    // data pins: 4, 8, 16
  unsigned bank_groups = 1;    // 1: the standard has none
  unsigned banks_per_group = 8;
  std::uint64_t rows = 0;
  unsigned page_bytes = 0;     // one row of one device
  unsigned burst_length = 8;   // beats of a read or write
  unsigned channel_bits = 64;  // data bits of a channel as usually built: 64, LPDDR4 16, DDR5 32

  // In clocks. _s: another bank group, _l: the same; both the same without bank groups.
  unsigned cl = 0, cwl = 0;
  unsigned trcd = 0;
  unsigned trp = 0, trp_all = 0;   // after PRE of one bank; of all banks
  unsigned tras = 0, trc = 0;
  unsigned trrd_s = 0, trrd_l = 0;
  unsigned tfaw = 0;
  unsigned tccd_s = 0, tccd_l = 0;
  unsigned tccd_l_wr = 0;          // write to write, same group (DDR5); else tccd_l
  unsigned twr = 0;
  unsigned twtr_s = 0, twtr_l = 0;
  unsigned trtp = 0;
  unsigned read_to_write = 0;      // RD to WR, same rank
  unsigned write_to_read_extra = 0;  // WR to RD is cwl + burst/2 + twtr + this (LPDDR4: 1)
  unsigned rank_switch = 2;        // idle data clocks between bursts of different ranks
  unsigned trefi = 0, trfc = 0;    // all-bank refresh
  unsigned trefi_bank = 0, trfc_bank = 0;  // per-bank refresh; 0: the standard has none
  unsigned postponable = 8;        // refreshes that may be owed at any time

  SupplyCurrents currents;
  std::vector<GradeSource> sources;

  unsigned banks() const { return bank_groups * banks_per_group; }
  unsigned burst_clocks() const { return burst_length / 2; }
  unsigned write_to_read_s() const { return cwl + burst_clocks() + twtr_s + write_to_read_extra; }
  unsigned write_to_read_l() const { return cwl + burst_clocks() + twtr_l + write_to_read_extra; }
  unsigned write_to_precharge() const { return cwl + burst_clocks() + twr; }

  // What contradicts itself or is out of range (tRC below tRAS + tRP, a zero clock, ...); empty if nothing.
  std::vector<std::string> problems() const;
};

// The names of the grades that are built in, in the order of every listing.
const std::vector<std::string>& builtin_grades();

// A built-in grade by name, for a density and a device width the standard has, or a user's grade file by path.
// 0 stands for the grade's usual density and width. Throws GradeError (grade_file.h) that lists every problem,
// with file and line for a file, and the known names for an unknown one.
Grade load_grade(const std::string& name_or_path, unsigned density_gbit = 0, unsigned device_bits = 0);

}  // namespace earshot
