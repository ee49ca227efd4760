// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/command.h"

namespace earshot {

const char* name_of(DramCommand command) {
  switch (command) {
    case DramCommand::activate:
      return "ACT";
    case DramCommand::read:
      return "RD";
    case DramCommand::read_precharge:
      return "RDA";
    case DramCommand::write:
      return "WR";
    case DramCommand::write_precharge:
      return "WRA";
    case DramCommand::precharge:
      return "PRE";
    case DramCommand::precharge_all:
      return "PREA";
    case DramCommand::refresh:
      return "REF";
    case DramCommand::refresh_bank:
      return "REFpb";
  }
  return "?";
}

}  // namespace earshot
