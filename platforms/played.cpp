// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "played.h"

#include <algorithm>

#include "simulate.h"

namespace earshot {
namespace {

constexpr const char* stall_id = "/earshot/bus/stall";

// sc_start(), with what stopped it turned into what it means: an exception that leaves a method process reaches us as
// a report.
template <typename... Duration>
void simulate_on(Platform& platform, Duration... duration) {
  try {
    sc_core::sc_start(duration...);
  } catch (const sc_core::sc_report& report) {
    if (platform.monitor() != nullptr && !platform.monitor()->violation().empty())
      throw Finding(platform.monitor()->violation());
    if (std::string(report.get_msg_type()) != stall_id) throw;
    throw Finding(report.get_msg() + platform.players_waiting() + platform.memories_waiting());
  }
}

[[noreturn]] void hangs(const Platform& platform) {
  std::string text = "nothing can happen any more, at " + sc_core::sc_time_stamp().to_string() + ", but ";
  if (platform.unfinished() > 0)
    text += std::to_string(platform.unfinished()) + " of the players have not played all";
  else
    text += "not everything they caused is done";
  const std::string waiting = platform.waiting();
  throw Finding(text + (waiting.empty() ? "" : ". What waits:\n" + waiting));
}

[[noreturn]] void unusable(const Settings& settings, const PlayError& error) {
  std::string text = (settings.recording.empty() ? "the pattern" : settings.recording) + ": " + error.what();
  const bool addressed = text.find("TLM_ADDRESS_ERROR_RESPONSE") != std::string::npos;
  if (addressed && !settings.recording.empty() && !settings.packed &&
      settings.memory_kind == MemoryKind::dram)
    text += "; no window holds that address: workload.addresses = packed moves a recording's pages together";
  throw UsageError(text);
}

// Until the last player finished and all it caused is done. Returns when that was.
Picoseconds play_all(const Settings& settings, Platform& platform) {
  simulate_on(platform);
  Picoseconds elapsed = 0;
  try {
    elapsed = platform.finished_at();
  } catch (const CoherenceViolation& violation) {
    throw Finding(violation.what());
  } catch (const PlayError& error) {
    unusable(settings, error);
  }
  if (platform.unfinished() > 0) hangs(platform);
  while (!platform.waiting().empty()) {
    if (!sc_core::sc_pending_activity()) hangs(platform);
    simulate_on(platform, from_ps(settings.bus_clock));
  }
  elapsed = std::max(elapsed, platform.bus().busy_until());
  for (const WindowMemory* memory : platform.cached_memories())
    elapsed = std::max(elapsed, memory->busy_until());
  // Annotated times may lie ahead of simulation time.
  if (elapsed > now_ps()) simulate_on(platform, from_ps(elapsed - now_ps()));
  return elapsed;
}

void check_values(Platform& platform) {
  const RecordedOrder* order = platform.recorded_order();
  if (order == nullptr || order->reads_that_differ() == 0) return;
  throw Finding(
      std::to_string(order->reads_that_differ()) + " of " + std::to_string(order->reads_compared()) +
      " reads returned another value than the recording has. " +
      (platform.monitor() == nullptr
           ? "Run with monitor = on to see whether an access was incoherent. First: "
           : "Every access was coherent, so the recording is not in the order its values came about. "
             "First: ") +
      order->first_difference());
}

void add_queues(const DramController& dram, std::vector<MeteredQueue>& queues) {
  const ExactClock& clock = dram.config().grade.clock;
  const double period = static_cast<double>(clock.picoseconds) / static_cast<double>(clock.clocks);
  queues.push_back({dram.name(), "requests without a place", dram.entry_meter()});
  for (unsigned channel = 0; channel < dram.config().channels; ++channel) {
    const std::string of = " of channel " + std::to_string(channel);
    queues.push_back({dram.name(), "reads" + of, dram.read_meter(channel), period});
    queues.push_back({dram.name(), "writes" + of, dram.write_meter(channel), period});
  }
}

std::vector<MeteredQueue> queues_of(Platform& platform) {
  std::vector<MeteredQueue> queues;
  for (const BusQueue& queue : platform.bus().queues())
    queues.push_back({platform.bus().name(), queue.name, *queue.meter});
  if (queues.empty()) return queues;  // annotated: nothing queues
  for (const auto& cache : platform.caches()) {
    queues.push_back({cache->name(), "misses", *cache->miss_queue()});
    queues.push_back({cache->name(), "write-back slots", *cache->write_back_queue()});
    queues.push_back({cache->name(), "accesses without a place", *cache->access_queue()});
  }
  for (const WindowMemory* memory : platform.cached_memories())
    if (memory->dram() != nullptr) add_queues(*memory->dram(), queues);
  return queues;
}

void finish(const Settings& settings, Platform& platform, Played& played) {
  if (settings.flush_at_end) {
    platform.request_flush();
    simulate_on(platform);
    if (!platform.flushed()) hangs(platform);
  }
  for (const auto& cache : platform.caches()) played.dirty_lines += cache->owned_lines();
  if (platform.monitor() != nullptr) platform.monitor()->check_memory();
}

}  // namespace

Played play(const Settings& settings, Platform& platform) {
  Played played;
  played.elapsed = play_all(settings, platform);
  check_values(platform);
  played.bus = platform.bus().totals();
  played.queues = queues_of(platform);
  for (const auto& cache : platform.caches()) played.caches.push_back(cache->totals());
  for (const WindowMemory* memory : platform.cached_memories()) {
    played.memory_busy.push_back(memory->busy_time());
    played.dram.push_back(memory->dram() == nullptr ? DramCounts{} : memory->dram()->counts());
  }
  try {
    finish(settings, platform, played);
  } catch (const CoherenceViolation& violation) {
    throw Finding(violation.what());
  }
  return played;
}

std::vector<std::string> broken_laws(Platform& platform) {
  std::vector<std::string> broken = platform.bus().broken_laws();
  const auto add = [&](const std::vector<std::string>& more) {
    broken.insert(broken.end(), more.begin(), more.end());
  };
  for (const auto& cache : platform.caches()) {
    add(cache->broken_laws());
    const CacheTotals totals = cache->totals();
    if (totals.parts.total() != totals.latency().sum())
      broken.push_back(std::string(cache->name()) +
                       ": the parts of its accesses' latencies are not their sum");
  }
  for (const WindowMemory* memory : platform.cached_memories())
    if (memory->dram() != nullptr) add(memory->dram()->broken_laws());
  return broken;
}

}  // namespace earshot
