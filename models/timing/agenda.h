// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An Agenda calls members of its module at chosen times, in order of time and, within one time, in the order they
// were asked for. It needs one kernel event however much is pending, and one kernel notification for each distinct
// time. Its module runs it:
//
//   SC_METHOD(work); sensitive << agenda_.due(); dont_initialize();    void work() { agenda_.run(); }
#pragma once

#include <algorithm>
#include <cstdint>
#include <systemc>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

class Agenda {
 public:
  // Calls (owner->*Method)(item) at `time`, which is not past. Callable from any process, also while run() runs.
  template <auto Method, typename Owner, typename Item>
  void at(Picoseconds time, Owner* owner, Item* item) {
    push({time, next_++, owner, item, [](void* self, void* what) {
            (static_cast<Owner*>(self)->*Method)(static_cast<Item*>(what));
          }});
  }

  const sc_core::sc_event& due() const { return due_; }
  void run();
  bool empty() const { return entries_.empty(); }

 private:
  struct Entry {
    Picoseconds time;
    std::uint64_t number;
    void* owner;
    void* item;
    void (*call)(void* owner, void* item);
    bool operator<(const Entry& other) const {  // for a heap whose front is the earliest
      return time != other.time ? time > other.time : number > other.number;
    }
  };
  static constexpr Picoseconds never = ~Picoseconds{0};

  void push(const Entry& entry) {
    entries_.push_back(entry);
    std::push_heap(entries_.begin(), entries_.end());
    if (!running_ && entry.time < armed_) arm(entry.time);
  }
  void arm(Picoseconds time) {
    armed_ = time;
    due_.notify(from_ps(time - std::min(time, now_ps())));
  }

  sc_core::sc_event due_{"due"};
  std::vector<Entry> entries_;  // a heap
  std::uint64_t next_ = 0;
  Picoseconds armed_ = never;   // when due_ is notified
  bool running_ = false;
};

}  // namespace earshot
