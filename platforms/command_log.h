// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The command log as a file: CSV with a header line, one DRAM command a line, channel after channel, each in the order
// of its clocks.
//
//     window,channel,clock,time-ps,command,rank,bank-group,bank,row,column
//
// `command` is the JEDEC name: ACT, RD, RDA, WR, WRA, PRE, PREA, REF, REFpb. Of bank group, bank, row and column a
// command has those that it is sent with; others are empty. RD, RDA, WR and WRA also have the row that they are meant for,
// so that a log can be judged. Numbers are decimal; columns count bursts.
#pragma once

#include <string>

#include "platform.h"

namespace earshot {

// Until now, of every DRAM of the platform.
std::string command_log(const Platform& platform);

}  // namespace earshot
