// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "command_log.h"

namespace earshot {
namespace {

std::string line_of(const CommandRecord& record, const ExactClock& clock) {
  const bool of_rank = record.command == DramCommand::precharge_all || record.command == DramCommand::refresh;
  const bool opens = record.command == DramCommand::activate;
  const bool moves = record.command == DramCommand::read || record.command == DramCommand::read_precharge ||
                     record.command == DramCommand::write || record.command == DramCommand::write_precharge;
  const auto field = [](bool has, std::uint64_t value) {
    return "," + (has ? std::to_string(value) : std::string());
  };
  return std::to_string(record.channel) + "," + std::to_string(record.clock) + "," +
         std::to_string(clock.edge(record.clock)) + "," + name_of(record.command) + field(true, record.rank) +
         field(!of_rank, record.bank_group) + field(!of_rank, record.bank) + field(opens || moves, record.row) +
         field(moves, record.column) + "\n";
}

}  // namespace

std::string command_log(const Platform& platform) {
  std::string text = "window,channel,clock,time-ps,command,rank,bank-group,bank,row,column\n";
  for (const WindowMemory* memory : platform.cached_memories()) {
    if (memory->dram() == nullptr) continue;
    const DramConfig& config = memory->dram()->config();
    for (unsigned channel = 0; channel < config.channels; ++channel)
      for (const CommandRecord& record : memory->dram()->commands(channel))
        text += memory->window().name + "," + line_of(record, config.grade.clock);
  }
  return text;
}

}  // namespace earshot
