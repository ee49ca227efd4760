// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/address_map.h"

#include <sstream>

namespace earshot {
namespace {

std::string text_of(const Window& window) {
  std::ostringstream out;
  out << "window '" << window.name << "' [0x" << std::hex << window.base << ", 0x" << window.last() << "]";
  return out.str();
}

}  // namespace

std::vector<std::string> AddressMap::problems(unsigned line_bytes) const {
  std::vector<std::string> found;
  if (windows_.empty()) found.push_back("the address map has no window: at least one is needed");
  for (std::size_t i = 0; i < windows_.size(); ++i) {
    const Window& window = windows_[i];
    if (window.name.empty()) found.push_back("window " + std::to_string(i) + " has no name");
    if (window.size != 0 && window.last() < window.base) {
      found.push_back(text_of(window) + " runs past the end of the 64-bit address space: make it smaller");
      continue;
    }
    if (window.target_base + (window.last() - window.base) < window.target_base)
      found.push_back(text_of(window) + " leaves its target's 64-bit address space: lower its target_base");
    const bool whole_lines = line_bytes == 0 || ((window.base | window.target_base | window.size) % line_bytes) == 0;
    if (window.cached && !whole_lines)
      found.push_back(text_of(window) + " is cached, so its base and size must be multiples of the line, " +
                      std::to_string(line_bytes) + " bytes");
    if (window.max_burst > 256 || (window.max_burst & (window.max_burst - 1)) != 0)
      found.push_back(text_of(window) + " has a max_burst of " + std::to_string(window.max_burst) +
                      " bytes; expected a power of two from 1 to 256, or 0 for no limit");
    for (std::size_t j = 0; j < i; ++j) {
      if (window.name == windows_[j].name) found.push_back("two windows are named '" + window.name + "'");
      if (window.base <= windows_[j].last() && windows_[j].base <= window.last())
        found.push_back(text_of(window) + " overlaps " + text_of(windows_[j]) + ": windows must be disjoint");
    }
  }
  return found;
}

}  // namespace earshot
