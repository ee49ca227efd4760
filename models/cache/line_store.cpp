// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/line_store.h"

#include <algorithm>

namespace earshot {
namespace {

// splitmix64 (G. L. Steele, D. Lea, C. H. Flood, "Fast Splittable Pseudorandom Number Generators", 2014).
std::uint64_t splitmix64(std::uint64_t& state) {
  std::uint64_t z = (state += 0x9E3779B97F4A7C15u);
  z = (z ^ (z >> 30)) * 0xBF58476D1CE4E5B9u;
  z = (z ^ (z >> 27)) * 0x94D049BB133111EBu;
  return z ^ (z >> 31);
}

}  // namespace

LineStore::LineStore(const Geometry& geometry)
    : policy_(geometry.replacement),
      ways_(geometry.ways),
      line_shift_(static_cast<unsigned>(__builtin_ctz(geometry.line_bytes))),
      set_mask_(static_cast<std::size_t>(geometry.sets() - 1)),
      random_(geometry.seed),
      slots_(static_cast<std::size_t>(geometry.lines())),
      trees_(policy_ == Replacement::tree_plru ? static_cast<std::size_t>(geometry.sets()) : 0),
      bytes_(static_cast<std::size_t>(geometry.size_bytes)) {}

Slot* LineStore::victim(std::uint64_t line) {
  const std::size_t first = set_of(line) * ways_;
  const auto begin = slots_.begin() + static_cast<std::ptrdiff_t>(first);
  const auto end = begin + static_cast<std::ptrdiff_t>(ways_);
  const auto free = std::find_if(begin, end, [](const Slot& slot) { return slot.state == absent && !slot.pinned; });
  if (free != end) return &*free;

  std::size_t way = 0;
  switch (policy_) {
    case Replacement::lru:
    case Replacement::fifo:
      way = static_cast<std::size_t>(std::min_element(begin, end, [](const Slot& a, const Slot& b) {
                                       return a.pinned != b.pinned ? b.pinned : a.stamp < b.stamp;
                                     }) - begin);
      break;
    case Replacement::tree_plru:
      way = tree_victim(set_of(line));
      break;
    case Replacement::random:
      way = static_cast<std::size_t>(splitmix64(random_) % ways_);
      break;
  }
  for (std::size_t tried = 0; tried < ways_; ++tried, way = (way + 1) % ways_)
    if (!slots_[first + way].pinned) return &slots_[first + way];
  return nullptr;
}

// Each node on the way to the used leaf remembers that its other half is now the older one: a bit is 1 when the
// lower-numbered half was used more recently (Intel, Embedded Pentium Processor Family manual, 1998).
void LineStore::touch_tree(const Slot& slot) {
  const std::size_t index = index_of(slot);
  std::uint64_t& tree = trees_[index / ways_];
  std::size_t node = 1;
  for (std::size_t half = ways_ / 2; half > 0; half /= 2) {
    const bool upper = (index % ways_ & half) != 0;
    const std::uint64_t bit = std::uint64_t{1} << node;
    tree = upper ? tree & ~bit : tree | bit;
    node = node * 2 + (upper ? 1 : 0);
  }
}

std::size_t LineStore::tree_victim(std::size_t set) const {
  std::size_t node = 1;
  std::size_t way = 0;
  for (std::size_t half = ways_ / 2; half > 0; half /= 2) {
    const bool upper = (trees_[set] >> node & 1) != 0;
    if (upper) way += half;
    node = node * 2 + (upper ? 1 : 0);
  }
  return way;
}

}  // namespace earshot
