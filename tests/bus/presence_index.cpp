// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/presence_index.h"

#include <catch2/catch.hpp>
#include <map>
#include <random>

using namespace earshot;

TEST_CASE("the index agrees with a plain map under random adding and removing", "[bus]") {
  std::mt19937_64 random(3);  // seed 3
  PresenceIndex index;
  std::map<std::uint64_t, std::uint64_t> oracle;
  for (int i = 0; i < 200000; ++i) {
    const std::uint64_t line = random() % 3000 * 32;
    const int port = static_cast<int>(random() % 64);
    if (random() % 2 == 0) {
      index.add(line, port);
      oracle[line] |= std::uint64_t{1} << port;
    } else {
      index.remove(line, port);
      if (const auto found = oracle.find(line); found != oracle.end()) {
        found->second &= ~(std::uint64_t{1} << port);
        if (found->second == 0) oracle.erase(found);
      }
    }
    if (i % 1000 == 0) {
      REQUIRE(index.lines() == oracle.size());
      for (std::uint64_t at = 0; at < 3000 * 32; at += 32) {
        const auto found = oracle.find(at);
        REQUIRE(index.holders(at) == (found == oracle.end() ? 0 : found->second));
      }
    }
  }
}
