// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Timeline says what each stretch of a bus transaction's time was spent on, from its request on without gaps.
// An access that joins a transaction under way (a miss to a line already being fetched) is charged the stretches
// from there on. Kernel-free.
#pragma once

#include <algorithm>
#include <array>
#include <cassert>

#include "earshot/timing/latency.h"

namespace earshot {

class Timeline {
 public:
  explicit Timeline(Picoseconds begin = 0) : begin_(begin), end_(begin) {}

  // From end() until `until` the time went into `part`. REQUIRES: until >= end().
  void spend(LatencyPart part, Picoseconds until) {
    assert(until >= end_);
    if (until == end_) return;
    assert(count_ < steps_.size());
    steps_[count_++] = {part, until};
    end_ = until;
  }
  Picoseconds begin() const { return begin_; }
  Picoseconds end() const { return end_; }

  // What [since, end()) was spent on. REQUIRES: begin() <= since <= end().
  LatencyParts since(Picoseconds since) const {
    LatencyParts parts;
    Picoseconds from = begin_;
    for (std::size_t i = 0; i < count_; ++i) {
      if (steps_[i].until > since) parts[steps_[i].part] += steps_[i].until - std::max(from, since);
      from = steps_[i].until;
    }
    return parts;
  }

 private:
  struct Step {
    LatencyPart part;
    Picoseconds until;
  };
  Picoseconds begin_;
  Picoseconds end_;
  std::size_t count_ = 0;
  std::array<Step, 10> steps_;  // the longest: grant, address, snoop, queue, array, wait, data, and some to spare
};

}  // namespace earshot
