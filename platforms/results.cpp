// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "results.h"

#include <algorithm>
#include <cstdio>

#include "bottleneck.h"
#include "memory_results.h"
#include "results_numbers.h"

namespace earshot {
namespace {

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

// The mean and the percentiles of latencies, or of times.
Json spread(const Histogram& histogram) {
  return {{"mean-ns", mean_ns(histogram.sum(), histogram.count())},
          {"p50-ns", ns(histogram.percentile(50))},
          {"p95-ns", ns(histogram.percentile(95))},
          {"p99-ns", ns(histogram.percentile(99))},
          {"max-ns", ns(histogram.max())}};
}

Json counted_spread(const Histogram& histogram) {
  Json out = {{"count", histogram.count()}};
  out.update(spread(histogram));
  return out;
}

Json latency(const CacheTotals& totals) {
  const Histogram all = totals.latency();
  Json parts, sums, kinds;
  for (int i = 0; i < latency_parts; ++i) {
    const auto part = static_cast<LatencyPart>(i);
    parts[name_of(part)] = mean_ns(totals.parts[part], all.count());
    sums[name_of(part)] = totals.parts[part];
  }
  for (int i = 0; i < access_kinds; ++i)
    kinds[name_of(static_cast<AccessKind>(i))] = counted_spread(totals.kind[static_cast<std::size_t>(i)]);
  Json out = spread(all);
  out["total-ps"] = all.sum();
  out["parts-ns"] = parts;
  out["total-parts-ps"] = sums;
  out["kinds"] = kinds;
  return out;
}

Json grants(const SnoopingBusTotals& totals) {
  Json out = Json::array();
  for (std::size_t port = 0; port < totals.ports.size(); ++port) {
    const BusPortTotals& one = totals.ports[port];
    out.push_back({{"initiator", port},
                   {"grants", one.grants},
                   {"mean-wait-ns", mean_ns(one.wait, one.grants)},
                   {"longest-wait-ns", ns(one.longest_wait)}});
  }
  return out;
}

// Counts are of the whole run; times and utilisations of what came before the flush, which no initiator waits for.
Json bus(const SnoopingBusTotals& totals, const Played& played) {
  Json counts, costs;
  Picoseconds wait = 0;
  for (int i = 0; i < bus_kinds; ++i) {
    const BusKindTotals& kind = played.bus.kind[static_cast<std::size_t>(i)];
    const char* name = name_of(static_cast<BusKind>(i));
    wait += kind.wait;
    counts[name] = totals.kind[static_cast<std::size_t>(i)].count;
    costs[name] = {{"mean-ns", mean_ns(kind.time, kind.count)},
                   {"wait-ns", mean_ns(kind.wait, kind.count)},
                   {"address-cycles", kind.address_cycles},
                   {"data-cycles", kind.data_cycles}};
  }
  return {{"transactions", counts},
          {"utilisation", share(std::max(played.bus.address_busy, played.bus.data_busy), played.elapsed)},
          {"address-utilisation", share(played.bus.address_busy, played.elapsed)},
          {"data-utilisation", share(played.bus.data_busy, played.elapsed)},
          {"wait-ns", ns(wait)},
          {"costs", costs},
          {"queues", queues_json(played, "bus")},
          {"grants", grants(played.bus)}};
}

// Latencies without what accesses waited for each other: of the waiting for the bus, only arbitration and, on
// average, half a cycle until the next clock edge remain for each transaction somebody waits for.
Load load_of(const Settings& settings, const Played& played) {
  Load load;
  load.elapsed = played.elapsed;
  load.think = settings.think;
  load.in_flight = settings.in_flight;
  CacheTotals all;
  for (const CacheTotals& one : played.caches) all.add(one);
  load.accesses = all.reads + all.writes + all.uncached;
  std::uint64_t transactions = 0;
  Picoseconds io = all.uncached * settings.hit_time, wait = all.parts[LatencyPart::wait_for_grant];
  for (int i = 0; i < bus_kinds; ++i) {
    const BusKindTotals& kind = played.bus.kind[static_cast<std::size_t>(i)];
    if (static_cast<BusKind>(i) != BusKind::write_back) transactions += kind.count;
    if (static_cast<BusKind>(i) < BusKind::io_read) continue;
    io += kind.time;
    wait += kind.wait;
  }
  const Picoseconds unavoidable =
      transactions * (settings.arbitration_cycles * settings.bus_clock + settings.bus_clock / 2);
  const Picoseconds waited = wait - std::min(wait, unavoidable) + all.parts[LatencyPart::memory_queue];
  load.latency = all.parts.total() + io;
  load.uncontended = load.latency - waited;
  return load;
}

std::vector<Resource> resources_of(const Settings& settings, const Platform& platform, const Played& played) {
  std::vector<Resource> resources;
  if (settings.structure == BusStructure::connected) {
    resources.push_back({"bus", played.bus.address_busy});
  } else {
    resources.push_back({"address bus", played.bus.address_busy});
    resources.push_back({"data bus", played.bus.data_busy});
  }
  for (std::size_t i = 0; i < platform.cached_memories().size(); ++i) {
    const std::vector<Resource> more = memory_resources(platform, played, i);
    resources.insert(resources.end(), more.begin(), more.end());
  }
  return resources;
}

Json bottleneck(const Settings& settings, const Platform& platform, const Played& played) {
  const std::vector<Resource> resources = resources_of(settings, platform, played);
  const Bottleneck found = find_bottleneck(resources, load_of(settings, played));
  Json all = Json::array();
  for (const Resource& resource : resources)
    all.push_back({{"resource", resource.name}, {"utilisation", share(resource.busy, played.elapsed)}});
  Json out = {{"resource", found.resource},
              {"utilisation", found.utilisation},
              {"headroom", 1 - found.utilisation},
              {"demand-ns", found.demand_ps / 1000},
              {"initiators-at-work", found.initiators_at_work},
              {"initiators-at-saturation", nullptr},
              {"resources", all}};
  if (found.initiators_at_saturation > 0) out["initiators-at-saturation"] = found.initiators_at_saturation;
  return out;
}

Json checks(Platform& platform, const Played& played) {
  std::uint64_t latencies = 0;
  for (const CacheTotals& one : played.caches) latencies += one.latency().count();
  return {
      {"monitored", platform.monitor() != nullptr},
      {"line-accesses-checked", platform.monitor() == nullptr ? 0 : platform.monitor()->accesses_checked()},
      {"reads-compared-with-recording",
       platform.recorded_order() == nullptr ? 0 : platform.recorded_order()->reads_compared()},
      {"dirty-lines-left", played.dirty_lines},
      {"latencies-checked", latencies},
      {"queues-checked", played.queues.size()}};
}

std::string in_ns(Picoseconds time) {
  char text[40];
  std::snprintf(text, sizeof text, "%.1f ns", ns(time));
  return text;
}

Json findings(const Settings& settings, Platform& platform, const Played& played) {
  Json out = Json::array();
  for (std::size_t port = 0; port < played.bus.ports.size() && settings.longest_wait > 0; ++port)
    if (const Picoseconds wait = played.bus.ports[port].longest_wait; wait > settings.longest_wait)
      out.push_back("initiator " + std::to_string(port) + " waited " + in_ns(wait) +
                    " for a grant of the bus; bus.longest-wait allows " + in_ns(settings.longest_wait));
  for (const std::string& law : broken_laws(platform))
    out.push_back("a self-check fails, which is a bug in Earshot; do not use these results: " + law);
  return out;
}

}  // namespace

Json collect_results(const Settings& settings, const Table& table, Platform& platform, const Played& played) {
  const SnoopingBusTotals totals = platform.bus().totals();
  Json out;
  out["schema"] = results_schema;
  out["configuration"] = configuration(settings);
  out["protocol"] = table.name();
  out["elapsed-ns"] = ns(played.elapsed);

  CacheTotals all;
  Json initiators = Json::array();
  for (std::size_t i = 0; i < played.caches.size(); ++i) {
    all.add(played.caches[i]);
    initiators.push_back({{"initiator", i},
                          {"accesses", accesses(played.caches[i])},
                          {"latency", latency(played.caches[i])},
                          {"queues", queues_json(played, platform.caches()[i]->name())}});
  }
  out["accesses"] = accesses(all);
  out["bottleneck"] = bottleneck(settings, platform, played);
  out["bus"] = bus(totals, played);
  out["supplies"] = {{"owner", totals.supplied_by_owner},
                     {"sharer", totals.supplied_by_sharer},
                     {"memory", totals.supplied_by_memory}};
  out["memory"] = memory_results(platform, totals, played);
  out["latency"] = latency(all);
  out["latency"]["kinds"]["write-back"] =
      counted_spread(played.bus.kind[static_cast<std::size_t>(BusKind::write_back)].latency);
  out["initiators"] = initiators;
  out["checks"] = checks(platform, played);
  out["findings"] = findings(settings, platform, played);
  out["caution"] = caution;
  return out;
}

}  // namespace earshot
