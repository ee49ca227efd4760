// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A command on a DRAM channel's command bus, as the command log has it. Kernel-free.
#pragma once

#include <cstdint>

#include "earshot/timing/exact_clock.h"

namespace earshot {

enum class DramCommand : std::uint8_t {
  activate,
  read,
  read_precharge,   // read with auto-precharge
  write,
  write_precharge,
  precharge,
  precharge_all,
  refresh,          // all banks of a rank
  refresh_bank,     // one bank (per-bank refresh)
};
const char* name_of(DramCommand command);  // "ACT", "RD", "RDA", "WR", "WRA", "PRE", "PREA", "REF", "REFpb"

struct CommandRecord {
  Clocks clock = 0;        // the edge at which the command is issued
  DramCommand command = DramCommand::activate;
  unsigned channel = 0, rank = 0, bank_group = 0, bank = 0;  // bank within its group
  std::uint64_t row = 0;
  std::uint64_t column = 0;  // of the burst, counted in bursts
};

}  // namespace earshot
