// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A BurstQueue holds the bursts of one direction that wait for a channel: in order of arrival, and by bank.
// An entry keeps its slot until it is removed. Kernel-free.
#pragma once

#include <cstdint>
#include <vector>

#include "earshot/dram/dram_banks.h"
#include "earshot/timing/queue_meter.h"

namespace earshot {

class BurstQueue {
 public:
  using Slot = std::uint16_t;
  static constexpr Slot none = 0xffff;
  static constexpr unsigned longest = 4096;

  // What a burst found when its first command was issued.
  enum class Found : std::uint8_t { nothing_yet, hit, closed, conflict };
  struct Entry {
    std::uint64_t row = 0, order = 0;
    Clocks arrived = 0, started = 0;
    unsigned id = 0;
    unsigned column = 0;
    unsigned bank = 0;                  // of the channel
    std::uint16_t first = 0, last = 0;  // [first, last): bytes
    std::uint16_t older_reads = 0;  // a write: queued reads of its burst that must go before it; it is held
    Found found = Found::nothing_yet;

   private:
    friend BurstQueue;
    Slot older = none, younger = none;            // of all
    Slot bank_older = none, bank_younger = none;  // of its bank
  };

  BurstQueue(bool write, unsigned capacity, unsigned banks);

  bool write() const { return write_; }
  unsigned capacity() const { return static_cast<unsigned>(entries_.size()); }
  unsigned size() const { return size_; }
  bool empty() const { return size_ == 0; }
  bool full() const { return free_.empty(); }
  Entry& operator[](Slot slot) { return entries_[slot]; }
  const Entry& operator[](Slot slot) const { return entries_[slot]; }

  // REQUIRES: it is not full. Returns the slot. `number` names the burst.
  Slot append(const Entry& entry, std::uint64_t number, Clocks now);
  void remove(Slot slot, Clocks now);

  Slot oldest() const { return oldest_; }
  Slot after(Slot slot) const { return entries_[slot].younger; }
  std::uint64_t number(Slot slot) const { return numbers_[slot]; }
  Slot find(std::uint64_t number) const;  // any entry of this burst
  unsigned count(std::uint64_t number) const;

  // The burst that a bank should serve, and the step that this needs: the oldest that hits the open row, else
  // the oldest; held ones do not count.
  struct Turn {
    std::uint64_t order = 0;
    std::uint64_t open_row = 0;
    // The scheduler's. When the step is possible: not before `own` and what DramBanks says for `shared`, both
    // together `clock`. Of those possible at one clock the one with the lowest `place` goes first.
    Clocks own = 0, clock = 0;
    std::uint64_t place = 0;
    unsigned shared = 0;
    unsigned bank = 0;
    Slot slot = none;  // none: all are held
    DramStep step = DramStep::activate;
    bool known = false;  // else the rest, but for the bank, is not valid: see know()
  };
  std::vector<Turn>& turns() { return turns_; }  // of the banks with bursts
  Turn& turn_of(unsigned bank) { return turns_[by_bank_[bank].place]; }  // REQUIRES: it has bursts
  void know(Turn& turn, std::uint64_t open_row);
  // The bank's state has changed, or which of its bursts are held.
  void look_again(unsigned bank) {
    if (by_bank_[bank].oldest == none) return;
    turn_of(bank).known = false;
    if (by_bank_[bank].doubtful) return;
    by_bank_[bank].doubtful = true;
    doubtful_.push_back(bank);
  }
  // Calls `learn` for each turn that is not known.
  template <typename Learn>
  void for_unknown_turns(Learn learn) {
    for (const unsigned bank : doubtful_) {
      by_bank_[bank].doubtful = false;
      if (by_bank_[bank].oldest != none && !turn_of(bank).known) learn(turn_of(bank));
    }
    doubtful_.clear();
  }

  const QueueMeter& meter() const { return meter_; }

 private:
  struct Bank {
    Slot oldest = none, youngest = none;
    unsigned place = 0;      // in turns_
    bool doubtful = false;  // is in doubtful_
  };

  bool write_;
  unsigned size_ = 0;
  std::vector<Entry> entries_;
  std::vector<std::uint64_t> numbers_;  // by slot, apart for quick search; nobody: free
  std::vector<Slot> free_;
  std::vector<Bank> by_bank_;
  std::vector<Turn> turns_;
  std::vector<unsigned> doubtful_;  // the banks whose turns are not known, and perhaps others
  Slot oldest_ = none, youngest_ = none;
  QueueMeter meter_;
};

}  // namespace earshot
