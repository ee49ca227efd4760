// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The shape of a cache: size, ways, line and replacement policy, validated together. Kernel-free.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

namespace earshot {

enum class Replacement : std::uint8_t {
  lru,       // the way used longest ago
  tree_plru, // a binary tree of bits points away from recent use; ways must be a power of two
  fifo,      // the way filled longest ago
  random,    // a seeded generator decides
};
const char* name_of(Replacement policy);
// False if `name` is no policy's name: see name_of().
bool replacement_from(const std::string& name, Replacement& policy);

struct Geometry {
  std::uint64_t size_bytes = 16 * 1024;
  unsigned ways = 4;
  unsigned line_bytes = 32;  // a power of two from 8 to 256
  Replacement replacement = Replacement::lru;
  std::uint64_t seed = 1;    // Replacement::random only

  std::uint64_t lines() const { return size_bytes / line_bytes; }
  std::uint64_t sets() const { return lines() / ways; }

  // Every problem, one a line; empty if the geometry is sound: the number of sets (size / ways / line) must be a
  // power of two.
  std::vector<std::string> problems() const;
};

}  // namespace earshot
