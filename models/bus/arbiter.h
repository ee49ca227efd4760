// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An Arbiter decides which of the ports that ask for the bus gets it next. The bus asks it only in arbitrated
// timing. Users may write their own: see SnoopingBusConfig::make_arbiter. Kernel-free.
#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

// The oldest request of one port that could be granted now.
struct Contender {
  int port = 0;
  Picoseconds since = 0;  // when it was asked for
};

class Arbiter {
 public:
  virtual ~Arbiter() = default;

  // Called at an instant at which the bus can be granted, bus clock cycle `cycle`. `contenders` is never empty and in
  // port order, one a port. Returns the index of the one that gets it: the bus grants that one.
  virtual std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t cycle) = 0;

  // The first cycle at or after `cycle` at which choose() may be called for these contenders. An arbiter that leaves
  // the bus idle while somebody asks (time slots) returns a later one. Never called with no contenders.
  virtual std::uint64_t next_cycle(const std::vector<Contender>&, std::uint64_t cycle) { return cycle; }
};

enum class Arbitration : std::uint8_t {
  first_come,           // the oldest request; of equally old ones the lowest port
  round_robin,          // the first port after the one granted last
  fixed_priority,       // the lowest port, or the first in `priorities`
  time_slots,           // only the owner of the current slot
  weighted_round_robin, // each port in turn, up to its weight grants in a row while it asks
  lottery,              // drawn at random, a port with twice the weight twice as likely
};

struct ArbiterConfig {
  Arbitration kind = Arbitration::first_come;
  std::vector<int> priorities;         // fixed_priority: ports, first in line first; empty: port order
  std::vector<unsigned> weights;       // weighted_round_robin, lottery: one a port, at least 1; empty: all 1
  std::vector<int> slots;              // time_slots: the owner of each slot, repeated for ever; empty: each port once
  unsigned slot_cycles = 8;            // time_slots: bus cycles in a slot
  std::uint64_t seed = 1;              // lottery

  // Every problem for a bus of `ports` ports; empty if there is none.
  std::vector<std::string> problems(int ports) const;
};

// REQUIRES: config.problems(ports) is empty.
std::unique_ptr<Arbiter> make_arbiter(const ArbiterConfig& config, int ports);

}  // namespace earshot
