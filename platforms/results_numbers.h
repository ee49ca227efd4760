// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// How the results document writes times, shares and queues. Internal to the results.
#pragma once

#include "played.h"
#include "simulate.h"

namespace earshot {

inline double ns(Picoseconds ps) { return static_cast<double>(ps) / 1000.0; }

inline double mean_ns(Picoseconds sum, std::uint64_t count) {
  return count == 0 ? 0.0 : ns(sum) / static_cast<double>(count);
}

inline double share(Picoseconds busy, Picoseconds elapsed) {
  return elapsed == 0 ? 0.0 : static_cast<double>(busy) / static_cast<double>(elapsed);
}

// The queues of one module.
inline Json queues_json(const Played& played, const std::string& owner) {
  Json out = Json::array();
  for (const MeteredQueue& queue : played.queues) {
    if (queue.owner != owner) continue;
    const auto elapsed = static_cast<Picoseconds>(static_cast<double>(played.elapsed) / queue.unit_ps);
    out.push_back({{"name", queue.name},
                   {"arrivals", queue.meter.arrivals()},
                   {"mean-present", queue.meter.mean_present(elapsed)},
                   {"mean-stay-ns", queue.meter.mean_stay() * queue.unit_ps / 1000},
                   {"longest-stay-ns", static_cast<double>(queue.meter.longest()) * queue.unit_ps / 1000},
                   {"most", queue.meter.most()}});
  }
  return out;
}

}  // namespace earshot
