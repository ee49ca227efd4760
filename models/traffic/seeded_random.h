// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// SplitMix64, a small random number generator whose numbers are the same on every machine: Steele, Lea and
// Flood, "Fast splittable pseudorandom number generators", OOPSLA 2014. The standard library's distributions
// differ from one library to the next, hence also the scaling of our own.
#pragma once

#include <cstdint>

namespace earshot {

class SplitMix64 {
 public:
  explicit SplitMix64(std::uint64_t seed) : state_(seed) {}

  // Spreads a number's differences over all 64 bits; one to one.
  static std::uint64_t mix(std::uint64_t number) {
    number = (number ^ (number >> 30)) * 0xbf58476d1ce4e5b9u;
    number = (number ^ (number >> 27)) * 0x94d049bb133111ebu;
    return number ^ (number >> 31);
  }

  std::uint64_t next() { return mix(state_ += 0x9e3779b97f4a7c15u); }

  // In [0, limit). The shares of the results differ by less than limit / 2^32.
  std::uint32_t below(std::uint32_t limit) {
    return static_cast<std::uint32_t>((next() >> 32) * limit >> 32);
  }

 private:
  std::uint64_t state_;
};

}  // namespace earshot
