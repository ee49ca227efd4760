// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A slow and obvious judge of command logs, written from the timing tables of the standards: it looks at
// pairs of commands and knows nothing of scheduling. For tests.
#pragma once

#include <string>
#include <vector>

#include "earshot/dram/command.h"
#include "earshot/dram/dram_config.h"

namespace earshot {

struct LogRules {
  unsigned ranks = 1;
  DramRefresh refresh = DramRefresh::all_bank;
  Clocks end = 0;  // of the time the log covers; 0: its last command
};

struct Broken {
  std::string rule;  // "tRCD", "data bus", ...
  std::string text;  // which commands, and by how much
};

// `log` holds the commands of one or more channels, each channel's in the order of their clocks.
std::vector<Broken> broken_rules(const std::vector<CommandRecord>& log, const Grade& grade,
                                 const LogRules& rules = {});

// Fails the test, with the first rules that are broken.
void require_legal(const std::vector<CommandRecord>& log, const Grade& grade, const LogRules& rules = {});
void require_legal(const std::vector<CommandRecord>& log, const DramConfig& config, Clocks end = 0);

}  // namespace earshot
