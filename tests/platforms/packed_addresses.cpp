// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "packed_addresses.h"

#include <catch2/catch.hpp>

#include "traffic/recording_files.h"

using namespace earshot;

namespace {

const std::vector<Window> ram_and_io{{"io", 0x1000, 0x1000, false, 0x1000}, {"ram", 0x10000, 0x8000, true, 0}};

Access access_to(std::uint64_t address, std::uint32_t size = 4) {
  Access access;
  access.address = address;
  access.size = size;
  return access;
}

}  // namespace

TEST_CASE("pages that are touched lie next to each other, in order, from the first cached window on", "[platforms]") {
  const TemporaryFolder folder;
  const std::string path = folder.file("r.csv");
  write_all(path, {access_to(0x7fff00001234), access_to(0x555500000ffe), access_to(0x1008), access_to(0x555500005000)});
  const PackedAddresses packed(path, ram_and_io);
  CHECK(packed.place(0x555500000ffe) == 0x10ffe);  // an access over two pages stays in one piece
  CHECK(packed.place(0x555500001001) == 0x11001);
  CHECK(packed.place(0x555500005000) == 0x12000);
  CHECK(packed.place(0x7fff00001234) == 0x13234);
  CHECK(packed.place(0x1008) == 0x1008);           // of the uncached window

  auto moved = packed.moved(open_recording(path));
  Access access;
  REQUIRE(moved->next(access));
  CHECK(access.address == 0x13234);
}

TEST_CASE("a window too small for the pages touched is refused", "[platforms]") {
  const TemporaryFolder folder;
  const std::string path = folder.file("r.csv");
  std::vector<Access> accesses;
  for (std::uint64_t page = 0; page < 9; ++page) accesses.push_back(access_to(page << 20));
  write_all(path, accesses);
  CHECK(message_of([&] { PackedAddresses(path, ram_and_io); }) ==
        "r.csv: touches 9 pages of 4 KiB; window 'ram' has room for 8");
  accesses.pop_back();
  write_all(path, accesses);
  CHECK(message_of([&] { PackedAddresses(path, ram_and_io); }) == "no error");
}
