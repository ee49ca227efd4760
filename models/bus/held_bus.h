// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Holds the bus, in annotated timing, for as long as one line's access takes effect.
#pragma once

#include "earshot/bus/transaction.h"

namespace earshot {

class HeldBus {
 public:
  // `delay` is the caller's local time. If another process held the bus, time has passed: it is taken off the delay,
  // and what goes past it is added to `wait`.
  HeldBus(RequestInterface& bus, sc_core::sc_time& delay, Picoseconds& wait) : bus_(bus) {
    const sc_core::sc_time before = sc_core::sc_time_stamp();
    if (!bus_.acquire()) return;
    const sc_core::sc_time passed = sc_core::sc_time_stamp() - before;
    if (passed > delay) wait += to_ps(passed - delay);
    delay = passed > delay ? sc_core::SC_ZERO_TIME : delay - passed;
  }
  ~HeldBus() { bus_.release(); }
  HeldBus(const HeldBus&) = delete;
  HeldBus& operator=(const HeldBus&) = delete;

 private:
  RequestInterface& bus_;
};

}  // namespace earshot
