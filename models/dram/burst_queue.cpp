// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/burst_queue.h"

#include <algorithm>

namespace earshot {

namespace {
constexpr std::uint64_t nobody = ~std::uint64_t{0};
}

BurstQueue::BurstQueue(bool write, unsigned capacity, unsigned banks)
    : write_(write), entries_(capacity), numbers_(capacity, nobody), by_bank_(banks) {
  for (unsigned slot = capacity; slot > 0; --slot) free_.push_back(static_cast<Slot>(slot - 1));
}

BurstQueue::Slot BurstQueue::append(const Entry& entry, std::uint64_t number, Clocks now) {
  const Slot slot = free_.back();
  free_.pop_back();
  ++size_;
  meter_.enter(now);
  numbers_[slot] = number;
  Entry& e = entries_[slot] = entry;
  e.arrived = now;
  e.younger = e.bank_younger = none;

  e.older = youngest_;
  (youngest_ == none ? oldest_ : entries_[youngest_].younger) = slot;
  youngest_ = slot;

  Bank& bank = by_bank_[e.bank];
  if (bank.oldest == none) {
    bank.place = static_cast<unsigned>(turns_.size());
    turns_.emplace_back().bank = e.bank;
  }
  e.bank_older = bank.youngest;
  (bank.youngest == none ? bank.oldest : entries_[bank.youngest].bank_younger) = slot;
  bank.youngest = slot;
  // A younger burst takes the turn from others only if it alone hits.
  const Turn& turn = turns_[bank.place];
  if (turn.slot == none || (turn.step < DramStep::read && e.row == turn.open_row)) look_again(e.bank);
  return slot;
}

void BurstQueue::remove(Slot slot, Clocks now) {
  const Entry& e = entries_[slot];
  meter_.leave(now, e.arrived);
  (e.older == none ? oldest_ : entries_[e.older].younger) = e.younger;
  (e.younger == none ? youngest_ : entries_[e.younger].older) = e.older;

  Bank& bank = by_bank_[e.bank];
  (e.bank_older == none ? bank.oldest : entries_[e.bank_older].bank_younger) = e.bank_younger;
  (e.bank_younger == none ? bank.youngest : entries_[e.bank_younger].bank_older) = e.bank_older;
  look_again(e.bank);
  if (bank.oldest == none) {
    by_bank_[turns_.back().bank].place = bank.place;
    turns_[bank.place] = turns_.back();
    turns_.pop_back();
  }
  numbers_[slot] = nobody;
  free_.push_back(slot);
  --size_;
}

BurstQueue::Slot BurstQueue::find(std::uint64_t number) const {
  if (empty()) return none;
  const auto found = std::find(numbers_.begin(), numbers_.end(), number);
  return found == numbers_.end() ? none : static_cast<Slot>(found - numbers_.begin());
}

unsigned BurstQueue::count(std::uint64_t number) const {
  return empty() ? 0 : static_cast<unsigned>(std::count(numbers_.begin(), numbers_.end(), number));
}

void BurstQueue::know(Turn& turn, std::uint64_t open_row) {
  turn.known = true;
  turn.open_row = open_row;
  turn.slot = none;
  turn.step = open_row == DramBanks::no_row ? DramStep::activate : DramStep::precharge;
  for (Slot slot = by_bank_[turn.bank].oldest; slot != none; slot = entries_[slot].bank_younger) {
    const Entry& e = entries_[slot];
    if (e.older_reads != 0) continue;
    const bool hit = e.row == open_row;
    if (turn.slot != none && !hit) continue;
    turn.slot = slot;
    turn.order = e.order;
    if (!hit) continue;
    turn.step = write_ ? DramStep::write : DramStep::read;
    return;
  }
}

}  // namespace earshot
