// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Calendar is the timetable of a resource that serves one request at a time: a bus, a memory. Requests book
// the earliest gap that fits, so a request that arrives with an earlier local time than one already booked
// (temporal decoupling) is charged as if it had come first, wherever the timetable still has room.
//
// In-example: busy [10,20) and [30,40); book(ready 12, 10) takes [20,30). Out-example: book(ready 12, 11) finds
// that gap too short and takes [40,51). Kernel-free. Cost: O(log n) to find the place, then the intervals
// passed over; neighbours merge, so a saturated resource is one interval.
#pragma once

#include <cstddef>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

class Calendar {
 public:
  // Books `duration` at the earliest start >= `ready`; returns the start.
  // REQUIRES: ready >= the last time given to forget_before().
  Picoseconds book(Picoseconds ready, Picoseconds duration);
  // Where book() would put it, without booking.
  Picoseconds earliest(Picoseconds ready, Picoseconds duration) const;
  // Marks [start, end) as busy, whatever of it is busy already: a booking whose end was not known at its start.
  void occupy(Picoseconds start, Picoseconds end);

  // Forgets every booking, but not the room for them.
  void clear() {
    busy_.clear();
    first_ = 0;
    busy_time_ = last_end_ = 0;
  }

  // No request will ever be ready before `time`: what ends at or before it may be forgotten.
  void forget_before(Picoseconds time) {
    while (first_ < busy_.size() && busy_[first_].end <= time) ++first_;
  }

  Picoseconds busy_time() const { return busy_time_; }   // the sum of all bookings
  Picoseconds last_end() const { return last_end_; }     // the end of the latest booking

 private:
  struct Interval {
    Picoseconds start, end;  // [start, end)
  };
  void insert(std::size_t place, Picoseconds start, Picoseconds end);

  std::vector<Interval> busy_;  // from first_ on: sorted, disjoint, no two touching
  std::size_t first_ = 0;       // what stands before is forgotten
  Picoseconds busy_time_ = 0;
  Picoseconds last_end_ = 0;
};

}  // namespace earshot
