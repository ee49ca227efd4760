// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/address_map.h"

#include <catch2/catch.hpp>

using namespace earshot;

TEST_CASE("an access is found in the window that holds all of it", "[bus]") {
  const AddressMap map({{"low", 0, 0x1000, true, 0}, {"high", 0x2000, 0x1000, false, 0}});
  CHECK(map.find(0, 4) == 0);
  CHECK(map.find(0xffc, 4) == 0);
  CHECK(map.find(0xffd, 4) == -1);
  CHECK(map.find(0x1000, 1) == -1);
  CHECK(map.find(0x2000, 0x1000) == 1);
  CHECK(map.find(0x2000, 0x1001) == -1);
}

TEST_CASE("a window of size 0 is all of the space from its base on", "[bus]") {
  const AddressMap map({{"all", 0, 0, true, 0}});
  CHECK(map.problems(32).empty());
  CHECK(map.find(~std::uint64_t{0}, 1) == 0);
  CHECK(map.find(~std::uint64_t{0}, 2) == -1);
}

TEST_CASE("every problem of a map is reported", "[bus]") {
  using Problems = std::vector<std::string>;
  CHECK(AddressMap({}).problems() == Problems{"the address map has no window: at least one is needed"});
  CHECK(AddressMap({{"a", 0, 0x1000, true, 0}, {"b", 0xfff, 0x10, true, 0}}).problems() ==
        Problems{"window 'b' [0xfff, 0x100e] overlaps window 'a' [0x0, 0xfff]: windows must be disjoint"});
  CHECK(AddressMap({{"a", 0, 0x1000, true, 0}, {"a", 0x1000, 0x10, true, 0}}).problems() ==
        Problems{"two windows are named 'a'"});
  CHECK(AddressMap({{"", 0, 0x1000, true, 0}}).problems() == Problems{"window 0 has no name"});
  CHECK(AddressMap({{"a", 0xfffffffffffffff0, 0x20, true, 0}}).problems() ==
        Problems{"window 'a' [0xfffffffffffffff0, 0xf] runs past the end of the 64-bit address space: make it smaller"});
  CHECK(AddressMap({{"a", 0x10, 0x1000, true, 0}}).problems(32) ==
        Problems{"window 'a' [0x10, 0x100f] is cached, so its base and size must be multiples of the line, 32 bytes"});
  CHECK(AddressMap({{"a", 0x10, 0x1000, false, 0}}).problems(32).empty());
}

TEST_CASE("a window's max_burst is a power of two to 256, or none", "[bus]") {
  using Problems = std::vector<std::string>;
  for (const unsigned possible : {0u, 1u, 2u, 64u, 256u})
    CHECK(AddressMap({{"a", 0, 0x1000, true, 0, possible}}).problems(32).empty());
  for (const unsigned impossible : {3u, 48u, 257u, 512u})
    CHECK(AddressMap({{"a", 0, 0x1000, true, 0, impossible}}).problems() ==
          Problems{"window 'a' [0x0, 0xfff] has a max_burst of " + std::to_string(impossible) +
                   " bytes; expected a power of two from 1 to 256, or 0 for no limit"});
}
