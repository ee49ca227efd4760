// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/geometry.h"

namespace earshot {
namespace {

bool power_of_two(std::uint64_t value) { return value != 0 && (value & (value - 1)) == 0; }

constexpr std::uint64_t largest_cache = std::uint64_t{1} << 30;

}  // namespace

const char* name_of(Replacement policy) {
  switch (policy) {
    case Replacement::lru:       return "lru";
    case Replacement::tree_plru: return "tree-plru";
    case Replacement::fifo:      return "fifo";
    case Replacement::random:    return "random";
  }
  return "?";
}

bool replacement_from(const std::string& name, Replacement& policy) {
  for (const Replacement each :
       {Replacement::lru, Replacement::tree_plru, Replacement::fifo, Replacement::random}) {
    if (name != name_of(each)) continue;
    policy = each;
    return true;
  }
  return false;
}

std::vector<std::string> Geometry::problems() const {
  std::vector<std::string> found;
  const std::string line_text = std::to_string(line_bytes);
  if (!power_of_two(line_bytes) || line_bytes < 8 || line_bytes > 256)
    found.push_back("line: " + line_text + " bytes; expected a power of two from 8 to 256");
  if (ways == 0) found.push_back("ways: 0; expected at least 1");
  if (size_bytes == 0 || size_bytes > largest_cache)
    found.push_back("size: " + std::to_string(size_bytes) + " bytes; expected 1 line to 1 GiB");
  if (!found.empty()) return found;

  const std::string shape =
      "size: " + std::to_string(size_bytes) + " bytes in " + std::to_string(ways) + " ways of " + line_text + "-byte lines";
  if (size_bytes % (std::uint64_t{ways} * line_bytes) != 0)
    found.push_back(shape + " does not divide: the size must be a multiple of " +
                    std::to_string(std::uint64_t{ways} * line_bytes));
  else if (!power_of_two(sets()))
    found.push_back(shape + " gives " + std::to_string(sets()) + " sets; expected a power of two");
  if (replacement == Replacement::tree_plru && !power_of_two(ways))
    found.push_back("replacement: tree-plru with " + std::to_string(ways) + " ways; expected a power of two");
  if (replacement == Replacement::tree_plru && ways > 64)
    found.push_back("replacement: tree-plru with " + std::to_string(ways) + " ways; expected at most 64");
  return found;
}

}  // namespace earshot
