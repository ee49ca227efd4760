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
#include <systemc>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

class Agenda {
 public:
  // Calls (owner->*Method)(item) at `time`, which is not past. Callable from any process, also while run() runs.
  template <auto Method, typename Owner, typename Item>
  void at(Picoseconds time, Owner* owner, Item* item) {
    push({time, owner, item, [](void* self, void* what) {
            (static_cast<Owner*>(self)->*Method)(static_cast<Item*>(what));
          }});
  }

  const sc_core::sc_event& due() const { return due_; }
  void run();
  bool empty() const { return entries_.empty(); }

 private:
  struct Entry {
    Picoseconds time;
    void* owner;
    void* item;
    void (*call)(void* owner, void* item);
  };
  static constexpr Picoseconds never = ~Picoseconds{0};

  void push(const Entry& entry) {
    auto place = entries_.end();
    while (place != entries_.begin() && (place - 1)->time <= entry.time) --place;
    entries_.insert(place, entry);
    if (!running_ && entry.time < armed_) arm(entry.time);
  }
  void arm(Picoseconds time) {
    armed_ = time;
    due_.notify(from_ps(time - std::min(time, now_ps())));
  }

  sc_core::sc_event due_{"due"};
  std::vector<Entry> entries_;  // the latest first: few at a time, mostly entered near the end
  Picoseconds armed_ = never;   // when due_ is notified
  bool running_ = false;
};

}  // namespace earshot
