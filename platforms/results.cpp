// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "results.h"

#include <algorithm>

namespace earshot {
namespace {

double ns(Picoseconds ps) { return static_cast<double>(ps) / 1000.0; }

double mean_ns(Picoseconds sum, std::uint64_t count) {
  return count == 0 ? 0.0 : ns(sum) / static_cast<double>(count);
}

double share(Picoseconds busy, Picoseconds elapsed) {
  return elapsed == 0 ? 0.0 : static_cast<double>(busy) / static_cast<double>(elapsed);
}

// "bus.width" becomes configuration["bus"]["width"].
Json configuration(const Settings& settings) {
  Json out = Json::object();
  for (const auto& [key, text] : settings.resolved) {
    const std::size_t dot = key.find('.');
    if (dot == std::string::npos)
      out[key] = text;
    else
      out[key.substr(0, dot)][key.substr(dot + 1)] = text;
  }
  return out;
}

Json accesses(const CacheTotals& totals) {
  return {{"reads", totals.reads},   {"writes", totals.writes},     {"hits", totals.hits},
          {"misses", totals.misses}, {"uncached", totals.uncached}, {"errors", totals.errors}};
}

Json latency(const CacheTotals& totals) {
  const Histogram all = totals.latency();
  Json parts, sums;
  for (int i = 0; i < latency_parts; ++i) {
    const auto part = static_cast<LatencyPart>(i);
    parts[name_of(part)] = mean_ns(totals.parts[part], all.count());
    sums[name_of(part)] = totals.parts[part];
  }
  return {{"mean-ns", mean_ns(all.sum(), all.count())},
          {"p50-ns", ns(all.percentile(50))},
          {"p95-ns", ns(all.percentile(95))},
          {"p99-ns", ns(all.percentile(99))},
          {"max-ns", ns(all.max())},
          {"total-ps", all.sum()},
          {"parts-ns", parts},
          {"total-parts-ps", sums}};
}

// Counts are of the whole run; times and utilisations of what came before the flush, which no initiator waits for.
Json bus(const SnoopingBusTotals& totals, const SnoopingBusTotals& before_flush, Picoseconds elapsed) {
  Json counts, costs;
  Picoseconds wait = 0;
  for (int i = 0; i < bus_kinds; ++i) {
    const BusKindTotals& kind = before_flush.kind[static_cast<std::size_t>(i)];
    const char* name = name_of(static_cast<BusKind>(i));
    wait += kind.wait;
    counts[name] = totals.kind[static_cast<std::size_t>(i)].count;
    costs[name] = {{"mean-ns", mean_ns(kind.time, kind.count)},
                   {"wait-ns", mean_ns(kind.wait, kind.count)},
                   {"address-cycles", kind.address_cycles},
                   {"data-cycles", kind.data_cycles}};
  }
  return {{"transactions", counts},
          {"utilisation", share(std::max(before_flush.address_busy, before_flush.data_busy), elapsed)},
          {"address-utilisation", share(before_flush.address_busy, elapsed)},
          {"data-utilisation", share(before_flush.data_busy, elapsed)},
          {"wait-ns", ns(wait)},
          {"costs", costs}};
}

// Of the busiest memory behind a cached window.
Picoseconds memory_busy(const Platform& platform) {
  Picoseconds busy = 0;
  for (const PlainMemory* memory : platform.cached_memories()) busy = std::max(busy, memory->busy_time());
  return busy;
}

void check_values(Platform& platform) {
  const RecordedOrder* order = platform.recorded_order();
  if (order == nullptr || order->reads_that_differ() == 0) return;
  throw Finding(std::to_string(order->reads_that_differ()) + " of " + std::to_string(order->reads_compared()) +
                " reads returned another value than the recording has. " +
                (platform.monitor() == nullptr
                     ? "Run with monitor = on to see whether an access was incoherent. First: "
                     : "Every access was coherent, so the recording is not in the order its values came about. "
                       "First: ") +
                order->first_difference());
}

}  // namespace

Json collect_results(const Settings& settings, const Table& table, Platform& platform) {
  Picoseconds elapsed = 0;
  try {
    elapsed = platform.finished_at();
  } catch (const CoherenceViolation& violation) {
    throw Finding(violation.what());
  } catch (const PlayError& error) {
    throw UsageError((settings.recording.empty() ? "the pattern" : settings.recording) + ": " + error.what());
  }
  check_values(platform);

  // What is booked behind the last access still belongs to the run; the write-backs of the flush do not.
  elapsed = std::max(elapsed, platform.bus().busy_until());
  for (const PlainMemory* memory : platform.cached_memories()) elapsed = std::max(elapsed, memory->busy_until());
  const SnoopingBusTotals before_flush = platform.bus().totals();
  const Picoseconds memory_was_busy = memory_busy(platform);

  std::uint64_t dirty = 0;
  try {
    sc_core::sc_time delay = from_ps(elapsed) - sc_core::sc_time_stamp();
    if (settings.flush_at_end)
      for (const auto& cache : platform.caches()) cache->flush(delay);
    for (const auto& cache : platform.caches()) dirty += cache->owned_lines();
    if (platform.monitor() != nullptr) platform.monitor()->check_memory();
  } catch (const CoherenceViolation& violation) {
    throw Finding(violation.what());
  }
  const SnoopingBusTotals totals = platform.bus().totals();

  Json out;
  out["schema"] = results_schema;
  out["configuration"] = configuration(settings);
  out["protocol"] = table.name();
  out["elapsed-ns"] = ns(elapsed);

  CacheTotals all;
  Json initiators = Json::array();
  for (const auto& cache : platform.caches()) {
    const CacheTotals one = cache->totals();
    all.add(one);
    initiators.push_back({{"initiator", cache->port()}, {"accesses", accesses(one)}, {"latency", latency(one)}});
  }
  out["accesses"] = accesses(all);
  out["bus"] = bus(totals, before_flush, elapsed);
  out["supplies"] = {{"owner", totals.supplied_by_owner},
                     {"sharer", totals.supplied_by_sharer},
                     {"memory", totals.supplied_by_memory}};
  out["memory"] = {
      {"block-reads", totals.block_reads},
      {"block-writes", totals.block_writes},
      {"word-writes", totals.word_writes},
      {"block-writes-at-end", totals.block_writes - before_flush.block_writes},
      {"utilisation", share(memory_was_busy, elapsed)}};
  out["latency"] = latency(all);
  out["initiators"] = initiators;

  Json checks = {{"monitored", platform.monitor() != nullptr},
                 {"line-accesses-checked", platform.monitor() == nullptr ? 0 : platform.monitor()->accesses_checked()},
                 {"reads-compared-with-recording",
                  platform.recorded_order() == nullptr ? 0 : platform.recorded_order()->reads_compared()},
                 {"dirty-lines-left", dirty}};
  out["checks"] = checks;
  out["caution"] = caution;
  return out;
}

}  // namespace earshot
