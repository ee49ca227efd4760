// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "bottleneck.h"

#include <algorithm>

namespace earshot {

Bottleneck find_bottleneck(const std::vector<Resource>& resources, const Load& load) {
  const Resource& busiest = *std::max_element(resources.begin(), resources.end(),
                                              [](const Resource& a, const Resource& b) { return a.busy < b.busy; });
  Bottleneck found;
  found.resource = busiest.name;
  if (load.elapsed == 0 || load.accesses == 0 || busiest.busy == 0) return found;
  const auto accesses = static_cast<double>(load.accesses);
  const auto think = static_cast<double>(load.think);
  found.utilisation = static_cast<double>(busiest.busy) / static_cast<double>(load.elapsed);
  found.demand_ps = static_cast<double>(busiest.busy) / accesses;
  // What one initiator alone takes for an access: it thinks before each, its latencies overlap.
  const double alone = std::max(think, (think + static_cast<double>(load.uncontended) / accesses) / load.in_flight);
  found.initiators_at_saturation = alone / found.demand_ps;
  return found;
}

}  // namespace earshot
