// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/arbiter.h"

#include <algorithm>

namespace earshot {
namespace {

// The place of the first contender whose port is at least `port`, or the number of contenders.
std::size_t place_from(const std::vector<Contender>& contenders, int port) {
  std::size_t i = 0;
  while (i < contenders.size() && contenders[i].port < port) ++i;
  return i;
}

bool asks(const std::vector<Contender>& contenders, int port) {
  const std::size_t place = place_from(contenders, port);
  return place < contenders.size() && contenders[place].port == port;
}

// The place of the first contender after `port`, going round.
std::size_t place_after(const std::vector<Contender>& contenders, int port) {
  return place_from(contenders, port + 1) % contenders.size();
}

class FirstCome : public Arbiter {
 public:
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    const auto older = [](const Contender& a, const Contender& b) { return a.since < b.since; };
    return static_cast<std::size_t>(std::min_element(contenders.begin(), contenders.end(), older) -
                                    contenders.begin());
  }
};

class RoundRobin : public Arbiter {
 public:
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    const std::size_t chosen = place_after(contenders, last_);
    last_ = contenders[chosen].port;
    return chosen;
  }

 private:
  int last_ = -1;
};

class FixedPriority : public Arbiter {
 public:
  FixedPriority(const std::vector<int>& priorities, int ports) : rank_(static_cast<std::size_t>(ports)) {
    for (std::size_t i = 0; i < rank_.size(); ++i)
      rank_[priorities.empty() ? i : static_cast<std::size_t>(priorities[i])] = i;
  }
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    const auto before = [this](const Contender& a, const Contender& b) {
      return rank_[static_cast<std::size_t>(a.port)] < rank_[static_cast<std::size_t>(b.port)];
    };
    return static_cast<std::size_t>(std::min_element(contenders.begin(), contenders.end(), before) -
                                    contenders.begin());
  }

 private:
  std::vector<std::size_t> rank_;  // of each port; 0 goes first
};

class TimeSlots : public Arbiter {
 public:
  TimeSlots(const std::vector<int>& slots, unsigned slot_cycles, int ports)
      : slots_(slots), slot_cycles_(slot_cycles) {
    for (int port = 0; port < ports && slots.empty(); ++port) slots_.push_back(port);
  }
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t cycle) override {
    return place_from(contenders, owner(cycle / slot_cycles_));
  }
  std::uint64_t next_cycle(const std::vector<Contender>& contenders, std::uint64_t cycle) override {
    std::uint64_t slot = cycle / slot_cycles_;
    while (!asks(contenders, owner(slot))) ++slot;  // ends: every port owns a slot
    return std::max(cycle, slot * slot_cycles_);
  }

 private:
  int owner(std::uint64_t slot) const { return slots_[slot % slots_.size()]; }

  std::vector<int> slots_;
  std::uint64_t slot_cycles_;
};

class WeightedRoundRobin : public Arbiter {
 public:
  WeightedRoundRobin(const std::vector<unsigned>& weights, int ports) : weights_(weights) {
    if (weights.empty()) weights_.assign(static_cast<std::size_t>(ports), 1);
  }
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    if (left_ > 0 && asks(contenders, last_)) {
      --left_;
      return place_from(contenders, last_);
    }
    const std::size_t chosen = place_after(contenders, last_);
    last_ = contenders[chosen].port;
    left_ = weights_[static_cast<std::size_t>(last_)] - 1;
    return chosen;
  }

 private:
  std::vector<unsigned> weights_;
  int last_ = -1;
  unsigned left_ = 0;  // grants the last one may still have in a row
};

class Lottery : public Arbiter {
 public:
  Lottery(const std::vector<unsigned>& weights, int ports, std::uint64_t seed)
      : weights_(weights), state_(seed) {
    if (weights.empty()) weights_.assign(static_cast<std::size_t>(ports), 1);
  }
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    std::uint64_t sum = 0;
    for (const Contender& contender : contenders) sum += weight(contender);
    std::uint64_t ticket = static_cast<std::uint64_t>(static_cast<unsigned __int128>(random()) * sum >> 64);
    std::size_t chosen = 0;
    for (; ticket >= weight(contenders[chosen]); ++chosen) ticket -= weight(contenders[chosen]);
    return chosen;
  }

 private:
  unsigned weight(const Contender& contender) const {
    return weights_[static_cast<std::size_t>(contender.port)];
  }
  // splitmix64 (G. L. Steele, D. Lea, C. H. Flood, "Fast Splittable Pseudorandom Number Generators", 2014).
  std::uint64_t random() {
    std::uint64_t z = state_ += 0x9e3779b97f4a7c15u;
    z = (z ^ (z >> 30)) * 0xbf58476d1ce4e5b9u;
    z = (z ^ (z >> 27)) * 0x94d049bb133111ebu;
    return z ^ (z >> 31);
  }

  std::vector<unsigned> weights_;
  std::uint64_t state_;
};

// ---- What is wrong with a configuration

std::string port_range(int ports) {
  return "the bus has ports 0 to " + std::to_string(ports - 1);
}

void check_weights(const std::vector<unsigned>& weights, int ports, std::vector<std::string>& found) {
  if (!weights.empty() && weights.size() != static_cast<std::size_t>(ports))
    found.push_back("weights: " + std::to_string(weights.size()) + " for " + std::to_string(ports) +
                    " ports; expected one a port, or none");
  for (std::size_t port = 0; port < weights.size(); ++port)
    if (weights[port] == 0)
      found.push_back("weights: 0 for port " + std::to_string(port) +
                      ", which would never be granted; expected at least 1");
}

// How often each port is in the list. Those that do not exist are a problem.
std::vector<unsigned> occurrences(const char* key, const std::vector<int>& list, int ports,
                                  std::vector<std::string>& found) {
  std::vector<unsigned> times(static_cast<std::size_t>(ports));
  for (const int port : list) {
    if (port >= 0 && port < ports)
      ++times[static_cast<std::size_t>(port)];
    else
      found.push_back(std::string(key) + ": there is no port " + std::to_string(port) + "; " +
                      port_range(ports));
  }
  return times;
}

void check_priorities(const std::vector<int>& priorities, int ports, std::vector<std::string>& found) {
  if (priorities.empty()) return;
  const std::vector<unsigned> times = occurrences("priorities", priorities, ports, found);
  for (std::size_t port = 0; port < times.size(); ++port)
    if (times[port] != 1)
      found.push_back("priorities: port " + std::to_string(port) + " is listed " +
                      std::to_string(times[port]) + " times; expected every port once");
}

void check_slots(const std::vector<int>& slots, unsigned slot_cycles, int ports,
                 std::vector<std::string>& found) {
  if (slot_cycles == 0)
    found.push_back("slot cycles: 0, so the time slots add to nothing; expected at least 1");
  if (slots.empty()) return;
  const std::vector<unsigned> times = occurrences("slots", slots, ports, found);
  for (std::size_t port = 0; port < times.size(); ++port)
    if (times[port] == 0)
      found.push_back("slots: port " + std::to_string(port) +
                      " owns no slot and would never be granted; expected at least one");
}

}  // namespace

std::vector<std::string> ArbiterConfig::problems(int ports) const {
  std::vector<std::string> found;
  switch (kind) {
    case Arbitration::first_come:
    case Arbitration::round_robin:
      break;
    case Arbitration::fixed_priority:
      check_priorities(priorities, ports, found);
      break;
    case Arbitration::time_slots:
      check_slots(slots, slot_cycles, ports, found);
      break;
    case Arbitration::weighted_round_robin:
    case Arbitration::lottery:
      check_weights(weights, ports, found);
      break;
  }
  return found;
}

std::unique_ptr<Arbiter> make_arbiter(const ArbiterConfig& config, int ports) {
  switch (config.kind) {
    case Arbitration::first_come:
      break;
    case Arbitration::round_robin:
      return std::make_unique<RoundRobin>();
    case Arbitration::fixed_priority:
      return std::make_unique<FixedPriority>(config.priorities, ports);
    case Arbitration::time_slots:
      return std::make_unique<TimeSlots>(config.slots, config.slot_cycles, ports);
    case Arbitration::weighted_round_robin:
      return std::make_unique<WeightedRoundRobin>(config.weights, ports);
    case Arbitration::lottery:
      return std::make_unique<Lottery>(config.weights, ports, config.seed);
  }
  return std::make_unique<FirstCome>();
}

}  // namespace earshot
