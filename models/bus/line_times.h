// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What annotated timing must remember of each line, because there a transaction takes effect when it is asked for,
// before the time of its grant: when the line has a transaction under way (a split bus lets one at a time), and until
// when a cache that lost its copy still had it. A fixed number of lines is remembered, one a place; a line displaced
// from its place is as if it had been idle. Kernel-free.
#pragma once

#include <array>
#include <cstdint>

#include "earshot/bus/presence_index.h"
#include "earshot/timing/calendar.h"

namespace earshot {

class LineTimes {
 public:
  struct Line {
    Calendar under_way;
    PresenceIndex::Mask losers = 0;  // the ports that lost their copy to one transaction, the last that took any,
    Picoseconds lost_at = 0;         // and its grant

    void lose(PresenceIndex::Mask ports, Picoseconds grant) {
      if (ports == 0) return;
      losers = ports;
      lost_at = grant;
    }
    void gain(int port) { losers &= ~(PresenceIndex::Mask{1} << port); }
    bool still_had_it(int port, Picoseconds time) const { return (losers >> port & 1) != 0 && time < lost_at; }
  };

  Line& of(std::uint64_t line) {
    Place& place = places_[place_of(line)];
    if (place.line == line) return place;
    place.line = line;
    place.under_way.clear();
    place.losers = 0;
    return place;
  }
  const Line* find(std::uint64_t line) const {
    const Place& place = places_[place_of(line)];
    return place.line == line ? &place : nullptr;
  }

 private:
  static constexpr unsigned bits = 7;
  struct Place : Line {
    std::uint64_t line = ~std::uint64_t{0};
  };
  static std::size_t place_of(std::uint64_t line) {  // Fibonacci hashing, Knuth, vol. 3, 6.4
    return static_cast<std::size_t>((line * 0x9E3779B97F4A7C15u) >> (64 - bits));
  }
  std::array<Place, std::size_t{1} << bits> places_;
};

}  // namespace earshot
