// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// How the results document writes times, shares and queues. Internal to the results.
#pragma once

#include "earshot/timing/queue_meter.h"
#include "simulate.h"

namespace earshot {

inline double ns(Picoseconds ps) { return static_cast<double>(ps) / 1000.0; }

inline double mean_ns(Picoseconds sum, std::uint64_t count) {
  return count == 0 ? 0.0 : ns(sum) / static_cast<double>(count);
}

inline double share(Picoseconds busy, Picoseconds elapsed) {
  return elapsed == 0 ? 0.0 : static_cast<double>(busy) / static_cast<double>(elapsed);
}

// `unit_ps`: what the meter counts time in.
inline Json queue_json(const std::string& name, const QueueMeter& meter, Picoseconds elapsed, double unit_ps) {
  return {{"name", name},
          {"arrivals", meter.arrivals()},
          {"mean-present", meter.mean_present(static_cast<Picoseconds>(static_cast<double>(elapsed) / unit_ps))},
          {"mean-stay-ns", meter.mean_stay() * unit_ps / 1000},
          {"longest-stay-ns", static_cast<double>(meter.longest()) * unit_ps / 1000},
          {"most", meter.most()}};
}

}  // namespace earshot
