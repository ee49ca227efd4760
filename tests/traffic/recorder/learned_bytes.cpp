// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recorder/learned_bytes.h"

#include <catch2/catch.hpp>
#include <map>
#include <random>

namespace earshot {
namespace {

using Finding = LearnedBytes::Finding;

TEST_CASE("a read of what was written agrees, in part or as a whole") {
  LearnedBytes bytes;
  bytes.write(0x1000, 8, 0x8877665544332211);
  CHECK(bytes.read(0x1000, 8, 0x8877665544332211) == Finding::agrees);
  CHECK(bytes.read(0x1002, 2, 0x4433) == Finding::agrees);
  CHECK(bytes.read(0x1007, 1, 0x88) == Finding::agrees);
  CHECK(bytes.bytes_first_read() == 0);
}

TEST_CASE("a byte that nothing touched before is learned from its first read") {
  LearnedBytes bytes;
  CHECK(bytes.read(0x1000, 4, 0xaabbccdd) == Finding::first_seen);
  CHECK(bytes.read(0x1002, 4, 0x0102aabb) == Finding::first_seen);
  CHECK(bytes.read(0x1000, 4, 0xaabbccdd) == Finding::agrees);
  CHECK(bytes.bytes_first_read() == 6);
}

TEST_CASE("a read of another value than the last known one differs once, and is what is known from then on") {
  LearnedBytes bytes;
  bytes.write(0x1000, 4, 0);
  CHECK(bytes.read(0x1003, 2, 0x0501) == Finding::differs);
  CHECK(bytes.read(0x1003, 2, 0x0501) == Finding::agrees);
  CHECK(bytes.read(0x1000, 4, 0x01000000) == Finding::agrees);
}

TEST_CASE("accesses across pages, and at the ends of memory, find the same as a map of bytes does") {
  LearnedBytes bytes;
  std::map<std::uint64_t, unsigned> oracle;
  std::mt19937_64 random(11);
  std::uint64_t first_read = 0;
  for (int i = 0; i < 20000; ++i) {
    const auto size = static_cast<std::uint32_t>(1 + random() % 8);
    const std::uint64_t bases[] = {0x2000 - 12, 0x3000, 0, ~std::uint64_t{0} - 31};
    const std::uint64_t address = bases[random() % 4] + random() % 24;
    std::uint64_t value = random() % 4 == 0 ? random() : 0;
    if (size < 8) value &= (std::uint64_t{1} << 8 * size) - 1;
    Finding expected = Finding::agrees;
    const bool is_read = random() % 2 == 0;
    for (std::uint32_t b = 0; b < size; ++b) {
      const auto byte = static_cast<unsigned>(value >> 8 * b & 0xff);
      const auto known = oracle.find(address + b);
      if (known == oracle.end()) {
        if (expected == Finding::agrees) expected = Finding::first_seen;
        if (is_read) ++first_read;
      } else if (known->second != byte) {
        expected = Finding::differs;
      }
      oracle[address + b] = byte;
    }
    if (is_read) {
      REQUIRE(bytes.read(address, size, value) == expected);
    } else {
      bytes.write(address, size, value);
    }
  }
  CHECK(bytes.bytes_first_read() == first_read);
}

}  // namespace
}  // namespace earshot
