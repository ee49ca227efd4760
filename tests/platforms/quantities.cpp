// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "quantities.h"

#include <catch2/catch.hpp>

using namespace earshot;

TEST_CASE("sizes are whole numbers of bytes with binary units", "[platforms]") {
  std::uint64_t value = 0;
  CHECK((parse_size("64", value) && value == 64));
  CHECK((parse_size("64B", value) && value == 64));
  CHECK((parse_size("16KiB", value) && value == 16384));
  CHECK((parse_size("1 MiB", value) && value == 1048576));
  for (const char* bad : {"", "KiB", "16KB", "1.5KiB", "-1", "0x10", "64 B x", "99999999999999999999", "99999999999GiB"})
    CHECK_FALSE(parse_size(bad, value));
}

TEST_CASE("times are whole picoseconds", "[platforms]") {
  Picoseconds value = 0;
  CHECK((parse_time("1.25ns", 0, value) && value == 1250));
  CHECK((parse_time("5 ns", 0, value) && value == 5000));
  CHECK((parse_time("800ps", 0, value) && value == 800));
  CHECK((parse_time("0.001ns", 0, value) && value == 1));
  CHECK((parse_time("1ms", 0, value) && value == 1000000000));
  CHECK((parse_time("3 bus-cycles", 5000, value) && value == 15000));
  CHECK((parse_time("1.5bus-cycles", 5000, value) && value == 7500));
  for (const char* bad : {"", "5", "ns", "0.0001ns", "5 s", "5 hz", "1.ns", ".5ns", "-1ns", "1e3ns", "3 bus-cycles"})
    CHECK_FALSE(parse_time(bad, 0, value));
}

TEST_CASE("numbers are decimal or hexadecimal and never wrap", "[platforms]") {
  std::uint64_t value = 0;
  CHECK((parse_number("18446744073709551615", value) && value == ~std::uint64_t{0}));
  CHECK((parse_number("0xffffffffffffffff", value) && value == ~std::uint64_t{0}));
  for (const char* bad : {"", "0x", "18446744073709551616", "0x1ffffffffffffffff", "12a", " 1", "1 "})
    CHECK_FALSE(parse_number(bad, value));
}

TEST_CASE("long numbers get commas", "[platforms]") {
  CHECK(with_commas(0) == "0");
  CHECK(with_commas(999) == "999");
  CHECK(with_commas(1000) == "1,000");
  CHECK(with_commas(1234567) == "1,234,567");
}

TEST_CASE("lists of numbers are separated by commas, blanks or both", "[platforms]") {
  std::vector<std::uint64_t> values{7};
  CHECK((parse_numbers("0,1,3", 3, values) && values == std::vector<std::uint64_t>{0, 1, 3}));
  CHECK((parse_numbers(" 0x10 , 2  4", 16, values) && values == std::vector<std::uint64_t>{16, 2, 4}));
  CHECK((parse_numbers("", 3, values) && values.empty()));
  for (const char* bad : {"4", "1,,2", ",1", "1,", "1;2", "one", "-1"}) CHECK_FALSE(parse_numbers(bad, 3, values));
}
