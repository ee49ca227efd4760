// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/presence_index.h"

#include <utility>

namespace earshot {

void PresenceIndex::add(std::uint64_t line, int port) {
  const Mask bit = Mask{1} << port;
  std::size_t i = home(line);
  for (; slots_[i].mask != 0; i = next(i)) {
    if (slots_[i].line == line) {
      slots_[i].mask |= bit;
      return;
    }
  }
  slots_[i] = {line, bit};
  if (++used_ * 2 > slots_.size()) grow();
}

void PresenceIndex::remove(std::uint64_t line, int port) {
  std::size_t hole = home(line);
  for (;; hole = next(hole)) {
    if (slots_[hole].mask == 0) return;
    if (slots_[hole].line == line) break;
  }
  slots_[hole].mask &= ~(Mask{1} << port);
  if (slots_[hole].mask != 0) return;
  --used_;
  // Close the gap: move back every later entry of the run that may stand at the hole.
  for (std::size_t i = next(hole); slots_[i].mask != 0; i = next(i)) {
    const std::size_t mask = slots_.size() - 1;
    if (((i - home(slots_[i].line)) & mask) < ((i - hole) & mask)) continue;
    slots_[hole] = slots_[i];
    slots_[i].mask = 0;
    hole = i;
  }
}

void PresenceIndex::grow() {
  std::vector<Slot> old = std::move(slots_);
  slots_.assign(old.size() * 2, Slot{});
  --shift_;
  for (const Slot& slot : old) {
    if (slot.mask == 0) continue;
    std::size_t i = home(slot.line);
    while (slots_[i].mask != 0) i = next(i);
    slots_[i] = slot;
  }
}

}  // namespace earshot
