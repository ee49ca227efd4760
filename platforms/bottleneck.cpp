// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "bottleneck.h"

#include <algorithm>

namespace earshot {

Bottleneck find_bottleneck(const std::vector<Resource>& resources, const Load& load) {
  const Resource& busiest =
      *std::max_element(resources.begin(), resources.end(),
                        [](const Resource& a, const Resource& b) { return a.busy < b.busy; });
  Bottleneck found;
  found.resource = busiest.name;
  if (load.elapsed == 0 || load.accesses == 0 || busiest.busy == 0) return found;
  const auto elapsed = static_cast<double>(load.elapsed);
  const auto accesses = static_cast<double>(load.accesses);
  // What one initiator takes for an access: it thinks before each, and its latencies overlap.
  const auto cycle = [&](Picoseconds latencies) {
    const auto think = static_cast<double>(load.think);
    return std::max(think, (think + static_cast<double>(latencies) / accesses) / load.in_flight);
  };
  found.utilisation = static_cast<double>(busiest.busy) / elapsed;
  found.demand_ps = static_cast<double>(busiest.busy) / accesses;
  found.initiators_at_work = accesses * cycle(load.latency) / elapsed;
  found.initiators_at_saturation = cycle(load.uncontended) / found.demand_ps;
  return found;
}

}  // namespace earshot
