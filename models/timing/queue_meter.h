// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A QueueMeter watches one queue and checks Little's law on it: the time-average number present is the arrival
// rate times the mean time present, for any discipline (J. D. C. Little, Operations Research 9(3), 1961). Over a
// finite run that is an identity between two integers, the area under the number present and the sum of the
// times present, which are kept here by separate arithmetic: a difference is a bug, never a matter of statistics.
// Kernel-free.
#pragma once

#include <algorithm>
#include <cstdint>

#include "earshot/timing/picoseconds.h"

namespace earshot {

class QueueMeter {
 public:
  // Times never go backwards from call to call.
  void enter(Picoseconds now) {
    advance(now);
    ++present_;
    ++arrivals_;
    entered_sum_ += now;
    most_ = std::max(most_, present_);
  }
  // `entered` is the time given to enter() for the one that leaves.
  void leave(Picoseconds now, Picoseconds entered) {
    advance(now);
    --present_;
    entered_sum_ -= entered;
    stayed_ += now - entered;
    longest_ = std::max(longest_, now - entered);
  }

  std::uint64_t arrivals() const { return arrivals_; }
  std::uint64_t present() const { return present_; }
  std::uint64_t most() const { return most_; }             // present at once
  Picoseconds longest() const { return longest_; }         // stay of one that has left
  double mean_present(Picoseconds now) const { return now == 0 ? 0.0 : double(area(now)) / double(now); }
  double mean_stay() const {  // of those that have left, in picoseconds
    const std::uint64_t left = arrivals_ - present_;
    return left == 0 ? 0.0 : double(stayed_) / double(left);
  }

  // L = lambda W on what has happened until `now`, those still present counted as far as they have come. Whether leave()
  // was given the right times shows when the queue is empty.
  bool littles_law_holds(Picoseconds now) const {
    const Wide stays = stayed_ + (static_cast<Wide>(present_) * now - entered_sum_);
    return area(now) == stays && (present_ > 0 || entered_sum_ == 0);
  }

 private:
  __extension__ typedef unsigned __int128 Wide;  // picoseconds times a number present outgrow 64 bits within a long run

  Wide area(Picoseconds now) const { return area_ + static_cast<Wide>(present_) * (now - last_); }
  void advance(Picoseconds now) {
    area_ = area(now);
    last_ = now;
  }

  std::uint64_t arrivals_ = 0;
  std::uint64_t present_ = 0;
  std::uint64_t most_ = 0;
  Picoseconds longest_ = 0;
  Picoseconds last_ = 0;
  Wide area_ = 0;         // under the number present, until last_
  Wide stayed_ = 0;       // by those that have left
  Wide entered_sum_ = 0;  // of those present
};

}  // namespace earshot
