// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// How the text of a key becomes a setting: one reader for each form of value. A reader is made for a member of
// Settings, or of a part of it: number(at(&Settings::caches), 1, 64), time(at(&Settings::bus_clock), 1),
// number(at(&Settings::dram, &DramConfig::ranks), 1, 16). It stores nothing if the text does not fit.
#pragma once

#include <string>
#include <utility>
#include <vector>

#include "keys.h"
#include "quantities.h"

namespace earshot {

using Apply = std::function<std::string(const std::string& text, Settings& settings)>;

template <typename Value>
auto at(Value Settings::*member) {
  return [=](Settings& settings) -> Value& { return settings.*member; };
}
template <typename Part, typename Value>
auto at(Part Settings::*part, Value Part::*member) {
  return [=](Settings& settings) -> Value& { return settings.*part.*member; };
}

template <typename Place>
Apply number(Place place, std::uint64_t least, std::uint64_t most) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::uint64_t value = 0;
    if (!parse_number(text, value) || value < least || value > most)
      return "a whole number from " + std::to_string(least) + " to " + std::to_string(most);
    auto& setting = place(settings);
    setting = static_cast<std::remove_reference_t<decltype(setting)>>(value);
    return {};
  };
}

// At most 1 ms: with cycle counts up to 1000 that leaves room for 10^7 of the slowest transactions in 2^64 ps.
template <typename Place>
Apply time(Place place, Picoseconds least) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    Picoseconds value = 0;
    if (!parse_time(text, settings.bus_clock, value) || value < least || value > Picoseconds{1000000000})
      return std::string("a time ") + (least > 0 ? "above 0, " : "") +
             "of at most 1 ms in whole picoseconds, with a unit: 5ns, 1.25ns, 800ps, 1us, 3 bus-cycles";
    place(settings) = value;
    return {};
  };
}

template <typename Place>
Apply power_of_two(Place place) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::uint64_t value = 0;
    if (!parse_size(text, value) || value < 1 || value > 256 || (value & (value - 1)) != 0)
      return "a power of two from 1 to 256 bytes: 8, 16B";
    place(settings) = static_cast<unsigned>(value);
    return {};
  };
}

template <typename Place>
Apply yes_no(Place place) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    return parse_yes_no(text, place(settings)) ? "" : "on or off";
  };
}

template <typename Place>
Apply word(Place place) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    place(settings) = text;
    return {};
  };
}

// One of a few words.
template <typename Value, typename Place>
Apply choice(Place place, std::vector<std::pair<const char*, Value>> words) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::string expected;
    for (std::size_t i = 0; i < words.size(); ++i) {
      if (text == words[i].first) {
        place(settings) = words[i].second;
        return {};
      }
      expected += (i == 0 ? "" : i + 1 == words.size() ? " or " : ", ") + std::string(words[i].first);
    }
    return expected;
  };
}

// A list of whole numbers up to a million; may be empty.
template <typename Place>
Apply numbers(Place place) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::vector<std::uint64_t> values;
    if (!parse_numbers(text, 1000000, values))
      return "whole numbers up to 1000000, separated by commas: 0, 1, 3";
    place(settings).assign(values.begin(), values.end());
    return {};
  };
}

}  // namespace earshot
