// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/calendar.h"

#include <algorithm>

namespace earshot {

Picoseconds Calendar::book(Picoseconds ready, Picoseconds duration) {
  if (duration == 0) return ready;
  busy_time_ += duration;

  // The common case: nothing is booked at or after `ready`.
  if (first_ == busy_.size() || busy_.back().end < ready) {
    insert(busy_.size(), ready, ready + duration);
    return ready;
  }
  auto place = std::lower_bound(busy_.begin() + static_cast<std::ptrdiff_t>(first_), busy_.end(), ready,
                                [](const Interval& interval, Picoseconds time) { return interval.end < time; });
  Picoseconds start = ready;
  for (; place != busy_.end() && place->start < start + duration; ++place) start = std::max(start, place->end);
  insert(static_cast<std::size_t>(place - busy_.begin()), start, start + duration);
  return start;
}

Picoseconds Calendar::earliest(Picoseconds ready, Picoseconds duration) const {
  auto place = std::lower_bound(busy_.begin() + static_cast<std::ptrdiff_t>(first_), busy_.end(), ready,
                                [](const Interval& interval, Picoseconds time) { return interval.end <= time; });
  Picoseconds start = ready;
  for (; place != busy_.end() && place->start < start + duration; ++place) start = std::max(start, place->end);
  return start;
}

void Calendar::occupy(Picoseconds start, Picoseconds end) {
  while (start < end) {  // gap by gap
    const Picoseconds from = earliest(start, 1);
    if (from >= end) return;
    const auto next = std::upper_bound(busy_.begin() + static_cast<std::ptrdiff_t>(first_), busy_.end(), from,
                                       [](Picoseconds time, const Interval& interval) { return time < interval.start; });
    const Picoseconds until = next == busy_.end() ? end : std::min(end, next->start);
    book(from, until - from);
    start = until;
  }
}

// Enters [start, end) before the interval at `place`, merging with neighbours it touches.
void Calendar::insert(std::size_t place, Picoseconds start, Picoseconds end) {
  last_end_ = std::max(last_end_, end);
  const bool joins_left = place > first_ && busy_[place - 1].end == start;
  const bool joins_right = place < busy_.size() && busy_[place].start == end;
  if (joins_left && joins_right) {
    busy_[place - 1].end = busy_[place].end;
    busy_.erase(busy_.begin() + static_cast<std::ptrdiff_t>(place));
  } else if (joins_left) {
    busy_[place - 1].end = end;
  } else if (joins_right) {
    busy_[place].start = start;
  } else {
    if (first_ > 64 && first_ * 2 > busy_.size()) {  // make the forgotten part pay for itself
      busy_.erase(busy_.begin(), busy_.begin() + static_cast<std::ptrdiff_t>(first_));
      place -= first_;
      first_ = 0;
    }
    busy_.insert(busy_.begin() + static_cast<std::ptrdiff_t>(place), Interval{start, end});
  }
}

}  // namespace earshot
