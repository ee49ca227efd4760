// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/grade_words.h"

#include <numeric>

namespace earshot {
namespace {

// Keep every product below 2^64.
constexpr std::size_t most_digits = 9;
constexpr Picoseconds longest_time = 1'000'000'000;

bool is_digit(char c) {
  return c >= '0' && c <= '9';
}

bool is_blank(char c) {
  return c == ' ' || c == '\t' || c == '\r';
}

// Appends the digits of `word` from `at` on to `number`; the number of them.
std::size_t read_digits(const std::string& word, std::size_t& at, std::uint64_t& number) {
  const std::size_t first = at;
  for (; at < word.size() && is_digit(word[at]); ++at) {
    if (at - first >= most_digits) throw LineError("'" + word + "' has too many digits");
    number = number * 10 + static_cast<std::uint64_t>(word[at] - '0');
  }
  return at - first;
}

[[noreturn]] void refuse(const std::string& word, const std::string& expected) {
  throw LineError("'" + word + "', expected " + expected);
}

}  // namespace

std::vector<GradeWord> words_of(const std::string& line) {
  std::vector<GradeWord> words;
  for (std::size_t at = 0; at < line.size();) {
    if (is_blank(line[at])) {
      ++at;
    } else if (line[at] == '#') {
      break;
    } else if (line[at] == '"') {
      const std::size_t end = line.find('"', at + 1);
      if (end == std::string::npos) throw LineError("a quotation mark is not closed");
      words.push_back({line.substr(at + 1, end - at - 1), true});
      at = end + 1;
    } else if (line[at] == '(' || line[at] == ')' || line[at] == ',') {
      words.push_back({std::string(1, line[at++]), false});
    } else {
      const std::size_t end = std::min(line.find_first_of(" \t\r(),#\"", at), line.size());
      words.push_back({line.substr(at, end - at), false});
      at = end;
    }
  }
  return words;
}

Quantity quantity_of(const std::string& word) {
  Quantity result;
  std::size_t at = 0;
  if (read_digits(word, at, result.numerator) == 0) refuse(word, "a number with a unit");
  if (at < word.size() && word[at] == '.') {
    const std::size_t decimals = read_digits(word, ++at, result.numerator);
    if (decimals == 0) refuse(word, "digits after the point");
    for (std::size_t i = 0; i < decimals; ++i) result.denominator *= 10;
  } else if (at < word.size() && word[at] == '/') {
    std::uint64_t divisor = 0;
    read_digits(word, ++at, divisor);
    if (divisor == 0) refuse(word, "a number that is not 0 after the stroke");
    result.denominator = divisor;
  }
  if (result.numerator > 1'000'000'000'000) throw LineError("'" + word + "' has too many digits");
  result.unit = word.substr(at);
  return result;
}

std::uint64_t whole_number(const std::string& word, std::uint64_t most) {
  const std::string expected = "a whole number of 1 to " + std::to_string(most);
  std::size_t at = 0;
  std::uint64_t number = 0;
  const bool digits = read_digits(word, at, number) > 0;
  if (!digits || at != word.size() || number == 0 || number > most) refuse(word, expected);
  return number;
}

Picoseconds time_of(const Quantity& quantity, const std::string& word) {
  const std::uint64_t unit = quantity.unit == "ps"   ? 1
                             : quantity.unit == "ns" ? 1000
                             : quantity.unit == "us" ? 1'000'000
                                                     : 0;
  if (unit == 0) refuse(word, "nCK, ps, ns or us after the number");
  const std::uint64_t scaled = quantity.numerator * unit;
  if (scaled % quantity.denominator != 0) refuse(word, "a whole number of picoseconds");
  const Picoseconds time = scaled / quantity.denominator;
  if (time > longest_time) refuse(word, "at most 1 ms");
  return time;
}

ExactClock clock_of(const std::string& word) {
  const Quantity quantity = quantity_of(word);
  ExactClock clock;
  if (quantity.unit == "MHz" || quantity.unit == "GHz") {
    clock = {quantity.numerator, quantity.denominator * (quantity.unit == "MHz" ? 1'000'000 : 1000)};
  } else if (quantity.unit == "ps" || quantity.unit == "ns") {
    clock = {quantity.denominator, quantity.numerator * (quantity.unit == "ps" ? 1 : 1000)};
  } else {
    refuse(word, "MHz, GHz, ps or ns after the number");
  }
  if (quantity.numerator == 0) refuse(word, "a clock that is not 0");
  const std::uint64_t common = std::gcd(clock.clocks, clock.picoseconds);
  return {clock.clocks / common, clock.picoseconds / common};
}

unsigned millivolts_of(const std::string& word) {
  const Quantity quantity = quantity_of(word);
  const std::uint64_t unit = quantity.unit == "V" ? 1000 : quantity.unit == "mV" ? 1 : 0;
  if (unit == 0) refuse(word, "V or mV after the number");
  const std::uint64_t millivolts = quantity.numerator * unit / quantity.denominator;
  if (millivolts > 10'000 || quantity.numerator * unit % quantity.denominator != 0) {
    refuse(word, "whole millivolts, at most 10 V");
  }
  return static_cast<unsigned>(millivolts);
}

double milliamperes_of(const std::string& word) {
  const Quantity quantity = quantity_of(word);
  if (quantity.unit != "mA") refuse(word, "mA after the number");
  return static_cast<double>(quantity.numerator) / static_cast<double>(quantity.denominator);
}

}  // namespace earshot
