// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A LineStore holds the lines of one cache: tags, states, bytes, and who is replaced next. It knows nothing of
// protocols beyond a state number and two fast bits that say which accesses need no table walk. Kernel-free.
#pragma once

#include <cstdint>
#include <vector>

#include "earshot/cache/geometry.h"
#include "earshot/protocol/table.h"

namespace earshot {

// One place for a line. `line` is valid while state != absent.
struct Slot {
  std::uint64_t line = ~std::uint64_t{0};  // the line's address; all ones while absent, which no line has
  std::uint64_t stamp = 0;                 // lru: last use; fifo: fill
  StateId state = absent;
  bool fast_read = false;
  bool fast_write = false;
  bool pinned = false;                     // a miss under way needs this place: victim() leaves it alone
};

class LineStore {
 public:
  // REQUIRES: geometry.problems() is empty.
  explicit LineStore(const Geometry& geometry);

  // The slot holding the line at `line`, or null. Does not count as use.
  Slot* find(std::uint64_t line) {
    if (slots_[last_].line == line) return &slots_[last_];
    const std::size_t first = set_of(line) * ways_;
    for (std::size_t i = first; i < first + ways_; ++i) {
      if (slots_[i].line != line) continue;
      last_ = i;
      return &slots_[i];
    }
    return nullptr;
  }

  // The slot a line at `line` would be filled into: an absent one of its set if there is any (lowest way first), else
  // the policy's victim; null if every one is pinned. If the policy's choice is pinned, the next way that is not.
  // Random draws its number here, so call once per fill.
  Slot* victim(std::uint64_t line);

  // A processor access used the slot.
  void touch(Slot& slot) {
    if (policy_ == Replacement::lru)
      slot.stamp = ++clock_;
    else if (policy_ == Replacement::tree_plru)
      touch_tree(slot);
  }

  // The slot now holds the line at `line`; counts as a use.
  void fill(Slot& slot, std::uint64_t line) {
    slot.line = line;
    slot.stamp = ++clock_;
    last_ = index_of(slot);
    if (policy_ == Replacement::tree_plru) touch_tree(slot);
  }
  void clear(Slot& slot) {  // a pinned slot stays so
    const bool pinned = slot.pinned;
    slot = Slot{};
    slot.pinned = pinned;
  }

  std::uint8_t* bytes(const Slot& slot) { return &bytes_[index_of(slot) << line_shift_]; }
  std::vector<Slot>& slots() { return slots_; }
  const std::vector<Slot>& slots() const { return slots_; }
  std::uint64_t line_of(std::uint64_t address) const { return address >> line_shift_ << line_shift_; }
  unsigned line_bytes() const { return 1u << line_shift_; }

 private:
  std::size_t set_of(std::uint64_t line) const { return static_cast<std::size_t>(line >> line_shift_) & set_mask_; }
  std::size_t index_of(const Slot& slot) const { return static_cast<std::size_t>(&slot - slots_.data()); }
  void touch_tree(const Slot& slot);
  std::size_t tree_victim(std::size_t set) const;

  Replacement policy_;
  unsigned ways_;
  unsigned line_shift_;
  std::size_t set_mask_;
  std::size_t last_ = 0;             // where the last find() or fill() ended
  std::uint64_t clock_ = 0;
  std::uint64_t random_;             // splitmix64 state
  std::vector<Slot> slots_;          // set by set
  std::vector<std::uint64_t> trees_; // tree_plru: node bits of each set, root is bit 1, children of n are 2n, 2n+1
  std::vector<std::uint8_t> bytes_;
};

}  // namespace earshot
