// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Quantities as people write them in a configuration: sizes, times, numbers, yes or no. Each function returns
// false and leaves `out` alone if the text is not such a quantity.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot {

// A whole number, decimal or 0x-hex.
bool parse_number(const std::string& text, std::uint64_t& out);
// Whole numbers up to `most`, separated by commas, blanks, or both; none is fine.
bool parse_numbers(const std::string& text, std::uint64_t most, std::vector<std::uint64_t>& out);
// A number of bytes: "64", "16KiB", "1 MiB", "64B". Units: B, KiB, MiB, GiB.
bool parse_size(const std::string& text, std::uint64_t& out);
// A time that is a whole number of picoseconds: "1.25ns", "5 ns", "800ps", "1us". Units: ps, ns, us, ms.
// "3 bus-cycles" is that many of `bus_cycle`; REQUIRES a space or none before the unit.
bool parse_time(const std::string& text, Picoseconds bus_cycle, Picoseconds& out);
bool parse_yes_no(const std::string& text, bool& out);  // on, off, yes, no, true, false

// 1234567 as "1,234,567".
std::string with_commas(std::uint64_t value);

}  // namespace earshot
