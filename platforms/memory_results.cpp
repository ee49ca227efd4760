// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "memory_results.h"

#include <algorithm>

#include "earshot/dram/energy.h"
#include "results_numbers.h"

namespace earshot {
namespace {

Json energy(const DramConfig& config, const DramCounts& counts) {
  const EnergyEstimate estimate = estimate_energy(config.grade, counts, config.channel_bits);
  Json out = {{"estimated", estimate.known}, {"method", estimate.note}};
  if (!estimate.known) return out;
  out["part"] = estimate.part;
  out["total-nj"] = estimate.total_pj() / 1000;
  out["activate-nj"] = estimate.activate_pj / 1000;
  out["read-nj"] = estimate.read_pj / 1000;
  out["write-nj"] = estimate.write_pj / 1000;
  out["refresh-nj"] = estimate.refresh_pj / 1000;
  out["background-nj"] = estimate.background_pj / 1000;
  return out;
}

Json dram_results(const WindowMemory& memory, const Played& played, std::size_t index) {
  const DramConfig& config = memory.dram()->config();
  const DramCounts& counts = played.dram[index];
  return {{"window", memory.window().name},
          {"grade", config.grade.name},
          {"standard", config.grade.standard},
          {"density-gbit", config.grade.density_gbit},
          {"device-bits", config.grade.device_bits},
          {"channels", config.channels},
          {"ranks", config.ranks},
          {"channel-bits", config.width()},
          {"bytes", config.bytes()},
          {"row-hits", counts.row_hits},
          {"row-closed", counts.row_closed},
          {"row-conflicts", counts.row_conflicts},
          {"read-bursts", counts.read_bursts},
          {"write-bursts", counts.write_bursts},
          {"reads-from-queue", counts.reads_from_queue},
          {"writes-merged", counts.writes_merged},
          {"activates", counts.activates},
          {"precharges", counts.precharges},
          {"refreshes", counts.refreshes},
          {"bank-refreshes", counts.bank_refreshes},
          {"most-postponed-refreshes", counts.most_postponed},
          {"data-bus-utilisation", share(played.memory_busy[index], played.elapsed)},
          {"energy", energy(config, counts)},
          {"queues", queues_json(played, memory.dram()->name())}};
}

}  // namespace

Json memory_results(const Platform& platform, const SnoopingBusTotals& totals, const Played& played) {
  const auto busiest = std::max_element(played.memory_busy.begin(), played.memory_busy.end());
  Json out = {{"block-reads", totals.block_reads},
              {"block-writes", totals.block_writes},
              {"word-writes", totals.word_writes},
              {"block-writes-at-end", totals.block_writes - played.bus.block_writes},
              {"utilisation", share(busiest == played.memory_busy.end() ? 0 : *busiest, played.elapsed)}};
  Json drams = Json::array();
  for (std::size_t i = 0; i < platform.cached_memories().size(); ++i) {
    const WindowMemory& memory = *platform.cached_memories()[i];
    if (memory.dram() != nullptr) drams.push_back(dram_results(memory, played, i));
  }
  out["dram"] = drams;
  return out;
}

std::vector<Resource> memory_resources(const Platform& platform, const Played& played, std::size_t index) {
  const WindowMemory& memory = *platform.cached_memories()[index];
  const std::string which =
      platform.cached_memories().size() == 1 ? "" : " of window " + memory.window().name;
  if (memory.dram() == nullptr) return {{"memory" + which, played.memory_busy[index]}};
  const DramConfig& config = memory.dram()->config();
  const std::uint64_t banks = std::uint64_t{config.channels} * config.ranks * config.grade.banks();
  const Clocks cycles = played.dram[index].activates * config.grade.trc / banks;
  return {{"DRAM data bus" + which, played.memory_busy[index]},
          {"DRAM banks" + which, config.grade.clock.edge(cycles)}};
}

}  // namespace earshot
