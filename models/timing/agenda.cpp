// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/agenda.h"

namespace earshot {

void Agenda::run() {
  const Picoseconds now = now_ps();
  struct Running {  // also if a call throws
    Agenda& agenda;
    ~Running() {
      agenda.running_ = false;
      agenda.armed_ = never;
      if (!agenda.entries_.empty()) agenda.arm(agenda.entries_.back().time);
    }
  } running{*this};
  running_ = true;
  while (!entries_.empty() && entries_.back().time <= now) {
    const Entry entry = entries_.back();
    entries_.pop_back();
    entry.call(entry.owner, entry.item);
  }
}

}  // namespace earshot
