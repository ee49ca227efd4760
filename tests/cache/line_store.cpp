// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/line_store.h"

#include <catch2/catch.hpp>

using namespace earshot;

namespace {

Geometry geometry(std::uint64_t size, unsigned ways, unsigned line, Replacement policy = Replacement::lru) {
  return {size, ways, line, policy, 1};
}

// Fills or touches `line`; returns whether it was there.
bool use(LineStore& store, std::uint64_t line) {
  if (Slot* slot = store.find(line); slot != nullptr) {
    store.touch(*slot);
    return true;
  }
  Slot& slot = *store.victim(line);
  store.clear(slot);
  slot.state = 1;
  store.fill(slot, line);
  return false;
}

}  // namespace

TEST_CASE("a sound geometry has no problems", "[cache]") {
  CHECK(geometry(16384, 4, 32).problems().empty());
  CHECK(geometry(8, 1, 8).problems().empty());
  CHECK(geometry(96, 3, 32).problems().empty());  // one set of three ways
}

TEST_CASE("each fault of a geometry is named with what was expected", "[cache]") {
  const auto only = [](const Geometry& g) {
    const auto found = g.problems();
    REQUIRE(found.size() == 1);
    return found.front();
  };
  CHECK(only(geometry(16384, 4, 48)) == "line: 48 bytes; expected a power of two from 8 to 256");
  CHECK(only(geometry(16384, 4, 512)) == "line: 512 bytes; expected a power of two from 8 to 256");
  CHECK(only(geometry(16384, 4, 4)) == "line: 4 bytes; expected a power of two from 8 to 256");
  CHECK(only(geometry(16384, 0, 32)) == "ways: 0; expected at least 1");
  CHECK(only(geometry(0, 1, 32)) == "size: 0 bytes; expected 1 line to 1 GiB");
  CHECK(only(geometry(1000, 4, 32)) ==
        "size: 1000 bytes in 4 ways of 32-byte lines does not divide: the size must be a multiple of 128");
  CHECK(only(geometry(16384, 3, 32)) ==
        "size: 16384 bytes in 3 ways of 32-byte lines does not divide: the size must be a multiple of 96");
  CHECK(only(geometry(96 * 5, 1, 32)) == "size: 480 bytes in 1 ways of 32-byte lines gives 15 sets; expected a power of two");
  CHECK(only(geometry(96, 3, 32, Replacement::tree_plru)) ==
        "replacement: tree-plru with 3 ways; expected a power of two");
  CHECK(geometry(16384, 0, 48).problems().size() == 2);
}

TEST_CASE("lines of different sets do not displace each other", "[cache]") {
  LineStore store(geometry(256, 1, 32));  // 8 sets
  for (std::uint64_t line = 0; line < 256; line += 32) CHECK_FALSE(use(store, line));
  for (std::uint64_t line = 0; line < 256; line += 32) CHECK(use(store, line));
  CHECK_FALSE(use(store, 256));
  CHECK_FALSE(use(store, 0));
  CHECK(use(store, 32));
}

TEST_CASE("random replacement repeats for the same seed and spreads over the ways", "[cache]") {
  const auto misses = [](std::uint64_t seed) {
    LineStore store({512, 16, 32, Replacement::random, seed});
    std::string pattern;
    for (std::uint64_t i = 0; i < 400; ++i) pattern += use(store, i * 7 % 20 * 32) ? 'h' : 'm';
    return pattern;
  };
  CHECK(misses(1) == misses(1));
  CHECK(misses(1) != misses(2));
  LineStore store({512, 16, 32, Replacement::random, 5});
  for (std::uint64_t line = 0; line < 16; ++line) use(store, line * 32);
  std::vector<bool> hit(16);
  for (int i = 0; i < 300; ++i) hit[static_cast<std::size_t>(store.victim(0) - store.slots().data())] = true;
  CHECK(std::count(hit.begin(), hit.end(), true) == 16);
}

TEST_CASE("a cleared slot is found no more and is filled first", "[cache]") {
  LineStore store(geometry(128, 4, 32));
  for (std::uint64_t line = 0; line < 128; line += 32) use(store, line);
  Slot* slot = store.find(64);
  REQUIRE(slot != nullptr);
  store.clear(*slot);
  CHECK(store.find(64) == nullptr);
  CHECK(store.victim(1024) == slot);
}
