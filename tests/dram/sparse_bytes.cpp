// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/sparse_bytes.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <cstring>
#include <map>
#include <random>

using namespace earshot;

TEST_CASE("bytes never written are 0, also in a page that exists", "[dram]") {
  SparseBytes bytes;
  std::uint8_t out[4] = {1, 2, 3, 4};
  bytes.read(0x123456789abcdef0, out, 4);
  CHECK(std::count(out, out + 4, 0) == 4);
  bytes.write(0x1000, out, 1);
  bytes.read(0x1ffc, out, 4);
  CHECK(std::count(out, out + 4, 0) == 4);
}

TEST_CASE("random reads and writes across pages agree with a map of bytes", "[dram]") {
  std::mt19937_64 random(11);  // seed 11
  SparseBytes bytes;
  std::map<std::uint64_t, std::uint8_t> oracle;
  for (int i = 0; i < 20000; ++i) {
    // Pages 256 apart share a place among the recent ones.
    const std::uint64_t page = random() % 3 * 256 + random() % 4;
    const std::uint64_t address = page * SparseBytes::page_bytes + 4090 + random() % 12;
    std::uint8_t data[16];
    const std::size_t length = 1 + random() % sizeof data;
    if (random() % 2 == 0) {
      for (std::size_t k = 0; k < length; ++k) oracle[address + k] = data[k] = static_cast<std::uint8_t>(random());
      bytes.write(address, data, length);
    } else {
      bytes.read(address, data, length);
      for (std::size_t k = 0; k < length; ++k) {
        const auto found = oracle.find(address + k);
        REQUIRE(data[k] == (found == oracle.end() ? 0 : found->second));
      }
    }
  }
}

TEST_CASE("the last byte of the space can be written", "[dram]") {
  SparseBytes bytes;
  const std::uint8_t in = 7;
  bytes.write(~std::uint64_t{0}, &in, 1);
  std::uint8_t out = 0;
  bytes.read(~std::uint64_t{0}, &out, 1);
  CHECK(out == 7);
}
