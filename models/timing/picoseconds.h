// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Time inside the models is an integer number of picoseconds; sc_time is used at TLM-2.0 interfaces only.
#pragma once

#include <cstdint>
#include <systemc>
#include <type_traits>

namespace earshot {

using Picoseconds = std::uint64_t;

// REQUIRES: the kernel's time resolution is 1 ps, its default; SnoopingBus checks that at end of elaboration.
inline Picoseconds to_ps(const sc_core::sc_time& time) { return time.value(); }
inline sc_core::sc_time from_ps(Picoseconds ps) { return sc_core::sc_time::from_value(ps); }

// The kernel keeps its time in one place: asked for once, since the call costs more than the models can afford.
inline Picoseconds now_ps() {
  if constexpr (std::is_reference_v<decltype(sc_core::sc_time_stamp())>) {
    static const sc_core::sc_time& now = sc_core::sc_time_stamp();
    return now.value();
  } else {  // the standard leaves it open
    return sc_core::sc_time_stamp().value();
  }
}

// The first edge at or after `time` of a clock with this period whose edge 0 is at time 0.
inline Picoseconds next_edge(Picoseconds time, Picoseconds period) { return (time + period - 1) / period * period; }

}  // namespace earshot
