// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "quantities.h"

#include <algorithm>
#include <array>
#include <utility>

namespace earshot {
namespace {

// Splits "1.25 ns" into its digits before and after the point and its unit. False if it does not start so.
struct Decimal {
  std::uint64_t whole = 0;
  std::uint64_t fraction = 0;    // fraction / scale
  std::uint64_t scale = 1;
  std::string unit;
};

bool parse_decimal(const std::string& text, Decimal& out) {
  std::size_t at = 0;
  const auto digits = [&](std::uint64_t& value, std::uint64_t* scale) {
    const std::size_t first = at;
    for (; at < text.size() && text[at] >= '0' && text[at] <= '9'; ++at) {
      if (at - first >= 15) return false;
      value = value * 10 + static_cast<std::uint64_t>(text[at] - '0');
      if (scale != nullptr) *scale *= 10;
    }
    return at > first;
  };
  if (!digits(out.whole, nullptr)) return false;
  if (at < text.size() && text[at] == '.') {
    ++at;
    if (!digits(out.fraction, &out.scale)) return false;
  }
  while (at < text.size() && text[at] == ' ') ++at;
  out.unit = text.substr(at);
  return true;
}

}  // namespace

bool parse_number(const std::string& text, std::uint64_t& out) {
  const bool hex = text.rfind("0x", 0) == 0 || text.rfind("0X", 0) == 0;
  const std::uint64_t base = hex ? 16 : 10;
  std::uint64_t value = 0;
  if (text.size() == (hex ? 2u : 0u)) return false;
  for (std::size_t i = hex ? 2 : 0; i < text.size(); ++i) {
    const char c = text[i];
    std::uint64_t digit = base;
    if (c >= '0' && c <= '9') digit = static_cast<std::uint64_t>(c - '0');
    if (c >= 'a' && c <= 'f') digit = static_cast<std::uint64_t>(c - 'a' + 10);
    if (c >= 'A' && c <= 'F') digit = static_cast<std::uint64_t>(c - 'A' + 10);
    if (digit >= base || value > (~std::uint64_t{0} - digit) / base) return false;
    value = value * base + digit;
  }
  out = value;
  return true;
}

bool parse_numbers(const std::string& text, std::uint64_t most, std::vector<std::uint64_t>& out) {
  std::vector<std::uint64_t> values;
  bool after_comma = false;
  for (std::size_t at = 0; (at = text.find_first_not_of(' ', at)) != std::string::npos;) {
    const std::size_t end = std::min(text.find_first_of(", ", at), text.size());
    std::uint64_t value = 0;
    if (!parse_number(text.substr(at, end - at), value) || value > most) return false;
    values.push_back(value);
    at = text.find_first_not_of(' ', end);
    after_comma = at != std::string::npos && text[at] == ',';
    if (after_comma) ++at;
  }
  if (after_comma) return false;
  out = values;
  return true;
}

bool parse_size(const std::string& text, std::uint64_t& out) {
  Decimal number;
  if (!parse_decimal(text, number) || number.scale != 1) return false;
  constexpr std::array<std::pair<const char*, unsigned>, 5> units{
      {{"", 0}, {"B", 0}, {"KiB", 10}, {"MiB", 20}, {"GiB", 30}}};
  for (const auto& [unit, shift] : units) {
    if (number.unit != unit || number.whole > (~std::uint64_t{0} >> shift)) continue;
    out = number.whole << shift;
    return true;
  }
  return false;
}

bool parse_time(const std::string& text, Picoseconds bus_cycle, Picoseconds& out) {
  Decimal number;
  if (!parse_decimal(text, number)) return false;
  const std::array<std::pair<const char*, Picoseconds>, 5> units{
      {{"ps", 1}, {"ns", 1000}, {"us", 1000000}, {"ms", 1000000000}, {"bus-cycles", bus_cycle}}};
  for (const auto& [unit, ps] : units) {
    if (number.unit != unit || ps == 0) continue;
    if (number.whole >= 1000000000000000000u / ps) return false;
    const unsigned __int128 fraction = static_cast<unsigned __int128>(number.fraction) * ps;
    if (fraction % number.scale != 0) return false;
    out = number.whole * ps + static_cast<Picoseconds>(fraction / number.scale);
    return true;
  }
  return false;
}

bool parse_yes_no(const std::string& text, bool& out) {
  const bool yes = text == "on" || text == "yes" || text == "true";
  if (!yes && text != "off" && text != "no" && text != "false") return false;
  out = yes;
  return true;
}

std::string with_commas(std::uint64_t value) {
  std::string text = std::to_string(value);
  for (std::size_t at = text.size(); at > 3;) text.insert(at -= 3, ",");
  return text;
}

}  // namespace earshot
