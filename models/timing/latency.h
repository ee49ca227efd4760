// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Where the time of an access went. The parts of one access add up to its latency exactly, in picoseconds.
#pragma once

#include <array>
#include <tlm>

#include "earshot/timing/picoseconds.h"

namespace earshot {

enum class LatencyPart : std::uint8_t {
  hit,             // the cache looks the line up
  wait_for_grant,  // arbitration, and the address bus or the data bus is not free or its clock edge has not come
  snoop,           // the other caches look the line up and answer
  owner_supply,    // another cache reads the line out of its store
  memory_queue,    // the memory serves somebody else
  memory_array,    // the memory serves this access
  transfer,        // address and data move over the bus
};
constexpr int latency_parts = 7;
const char* name_of(LatencyPart part);

struct LatencyParts {
  std::array<Picoseconds, latency_parts> ps{};

  Picoseconds& operator[](LatencyPart part) { return ps[static_cast<std::size_t>(part)]; }
  Picoseconds operator[](LatencyPart part) const { return ps[static_cast<std::size_t>(part)]; }
  void add(const LatencyParts& other) {
    for (std::size_t i = 0; i < ps.size(); ++i) ps[i] += other.ps[i];
  }
  Picoseconds total() const {
    Picoseconds sum = 0;
    for (const Picoseconds part : ps) sum += part;
    return sum;
  }
};

// An ignorable TLM-2.0 extension by which a memory says how much of the delay it added was spent waiting for
// its own queue. A target that knows nothing of it leaves it at zero: everything then counts as memory_array.
struct MemoryTimes : tlm::tlm_extension<MemoryTimes> {
  Picoseconds queue = 0;

  tlm::tlm_extension_base* clone() const override { return new MemoryTimes(*this); }
  void copy_from(const tlm::tlm_extension_base& other) override { *this = static_cast<const MemoryTimes&>(other); }
};

}  // namespace earshot
