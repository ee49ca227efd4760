// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Private to this room: the words of a grade file's line, and numbers with units.
#pragma once

#include <cstdint>
#include <stdexcept>
#include <string>
#include <vector>

#include "earshot/timing/exact_clock.h"

namespace earshot {

struct GradeWord {
  std::string text;
  bool quoted = false;
};

// What is wrong with a line, without the place.
class LineError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// The words of a line; brackets and commas are words of their own, quotes and comments are gone. Throws
// LineError.
std::vector<GradeWord> words_of(const std::string& line);

// A number and its unit: "7.5ns" is 75 / 10 ns.
struct Quantity {
  std::uint64_t numerator = 0, denominator = 1;
  std::string unit;
};
// Throws LineError if `word` is not one.
Quantity quantity_of(const std::string& word);

// These throw LineError with what was expected. The second one's result is a whole number of picoseconds.
std::uint64_t whole_number(const std::string& word, std::uint64_t most);
Picoseconds time_of(const Quantity& quantity, const std::string& word);
ExactClock clock_of(const std::string& word);
unsigned millivolts_of(const std::string& word);
double milliamperes_of(const std::string& word);

}  // namespace earshot
