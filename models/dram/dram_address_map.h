// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A DramAddressMap says where in the channels, ranks, banks, rows and columns an address is, and back. It is
// given as the order of the fields in the address, most significant first:
//
//     row rank bank column group channel    consecutive bursts go to other channels, then other groups
//     row rank bank group column channel    a whole row before the next bank
//     row bank column rank group column:2   split: the column's two lowest bits are at the bottom
//
// Below the fields are the bytes of a burst. A word takes all bits of its field, or those not given to other
// pieces of it; `word:n` takes n of them, and lower pieces hold lower bits. A field with only one value may
// be left out. A number that is no power of two (of rows, or channels) must come first. The map is one to
// one.
//
// Bank hashing replaces the bank by its exclusive or with the lowest bits of the row, and the group by that
// with the bits above them: rows that lie a power of two apart then fall into different banks. Kernel-free.
#pragma once

#include <array>
#include <cstdint>
#include <string>
#include <vector>

#include "earshot/dram/dram_config.h"

namespace earshot {

struct DramPlace {
  unsigned channel = 0, rank = 0, group = 0, bank = 0;  // bank within its group
  std::uint64_t row = 0;
  std::uint64_t column = 0;  // in bursts
};

class DramAddressMap {
 public:
  // REQUIRES: problems(config) is empty.
  explicit DramAddressMap(const DramConfig& config);

  // What is wrong with config.address_map for this geometry.
  static std::vector<std::string> problems(const DramConfig& config);

  // `burst` is an address divided by burst_bytes. REQUIRES: it is within the capacity.
  DramPlace place(std::uint64_t burst) const;
  std::uint64_t burst(const DramPlace& place) const;

 private:
  enum Field : std::uint8_t { channel, rank, group, bank, row, column, fields };
  static constexpr std::array<const char*, fields> words{"channel", "rank", "group", "bank", "row", "column"};
  struct Piece {
    Field field;
    unsigned bits;
    unsigned in_field = 0;  // its lowest bit there
    unsigned in_burst = 0;  // and here
    std::uint64_t mask = 0;  // `bits` ones
  };
  static std::array<std::uint64_t, fields> sizes(const DramConfig& config);
  static std::vector<Piece> parse(const DramConfig& config, std::vector<std::string>& problems);
  void hash(DramPlace& place) const;

  std::vector<Piece> pieces_;
  std::array<Piece, fields> lowest_;  // of each field; without bits if it has none
  std::vector<Piece> higher_;         // the others: of split fields
  bool hash_;
  unsigned bank_bits_;
  std::uint64_t bank_mask_, group_mask_;
};

}  // namespace earshot
