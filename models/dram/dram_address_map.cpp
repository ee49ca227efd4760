// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/dram_address_map.h"

#include <algorithm>
#include <numeric>
#include <sstream>

namespace earshot {

namespace {

unsigned bits_for(std::uint64_t values) {
  unsigned bits = 0;
  while (bits < 63 && (std::uint64_t{1} << bits) < values) ++bits;
  return bits;
}

bool power_of_two(std::uint64_t value) {
  return value != 0 && (value & (value - 1)) == 0;
}

constexpr unsigned the_rest = ~0u;

// "column" -> the_rest, "column:3" -> 3; false if the number is none.
bool read_bits(std::string& word, unsigned& bits) {
  bits = the_rest;
  const std::size_t colon = word.find(':');
  if (colon == std::string::npos) return true;
  const std::string number = word.substr(colon + 1);
  word.resize(colon);
  if (number.empty() || number.size() > 2 || number.find_first_not_of("0123456789") != std::string::npos)
    return false;
  bits = static_cast<unsigned>(std::stoul(number));
  return bits > 0;
}

}  // namespace

std::array<std::uint64_t, DramAddressMap::fields> DramAddressMap::sizes(const DramConfig& config) {
  return {config.channels,   config.ranks,    config.grade.bank_groups, config.grade.banks_per_group,
          config.grade.rows, config.columns()};
}

std::vector<DramAddressMap::Piece> DramAddressMap::parse(const DramConfig& config,
                                                         std::vector<std::string>& problems) {
  const auto complain = [&](const std::string& what) {
    problems.push_back("address map \"" + config.address_map + "\": " + what);
  };
  std::vector<Piece> pieces;
  std::istringstream text(config.address_map);
  for (std::string word; text >> word;) {
    const std::string written = word;
    unsigned bits = 0;
    const bool number_fine = read_bits(word, bits);
    const auto found = std::find(words.begin(), words.end(), word);
    if (found == words.end())
      complain("\"" + written + "\" is no field; expected row, rank, bank, group, column or channel");
    else if (!number_fine)
      complain("\"" + written + "\" has no number of bits; expected for example \"" + word + ":2\"");
    else
      pieces.push_back({static_cast<Field>(found - words.begin()), bits});
  }
  if (!problems.empty()) return pieces;

  const auto size = sizes(config);
  for (unsigned f = 0; f < fields; ++f) {
    const unsigned needed = bits_for(size[f]);
    const std::string name = words[f];
    unsigned given = 0, rests = 0;
    for (const Piece& piece : pieces) {
      if (piece.field != f) continue;
      if (piece.bits == the_rest)
        ++rests;
      else
        given += piece.bits;
    }
    if (rests > 1) complain("it repeats " + name);
    if (rests == 0 && given == 0 && needed > 0)
      complain("it misses " + name + ", of which there are " + std::to_string(size[f]));
    else if (given > needed || (rests == 0 && given < needed))
      complain(std::to_string(given) + " bits of " + name + " instead of " + std::to_string(needed));
    if (!power_of_two(size[f]) && (pieces.empty() || pieces.front().field != f))
      complain(std::to_string(size[f]) + " " + name + "s are no power of two, so " + name +
               " must come first");

    unsigned filled = 0;
    for (auto piece = pieces.rbegin(); piece != pieces.rend(); ++piece) {
      if (piece->field != f) continue;
      if (piece->bits == the_rest) piece->bits = needed - std::min(needed, given);
      piece->in_field = filled;
      filled += piece->bits;
    }
  }
  unsigned filled = 0;
  for (auto piece = pieces.rbegin(); piece != pieces.rend(); ++piece) {
    piece->in_burst = filled;
    filled += piece->bits;
    piece->mask = (std::uint64_t{1} << std::min(piece->bits, 63u)) - 1;
  }
  const unsigned all = filled + bits_for(config.burst_bytes());
  if (problems.empty() && all > 63) complain(std::to_string(all) + " bits do not fit an address");
  return pieces;
}

std::vector<std::string> DramAddressMap::problems(const DramConfig& config) {
  std::vector<std::string> problems;
  parse(config, problems);
  if (config.hash_banks &&
      !(power_of_two(config.grade.bank_groups) && power_of_two(config.grade.banks_per_group)))
    problems.push_back("bank hashing: needs powers of two of banks and groups");
  return problems;
}

DramAddressMap::DramAddressMap(const DramConfig& config)
    : hash_(config.hash_banks),
      bank_bits_(bits_for(config.grade.banks_per_group)),
      bank_mask_(config.grade.banks_per_group - 1),
      group_mask_(config.grade.bank_groups - 1) {
  std::vector<std::string> none;
  pieces_ = parse(config, none);
  pieces_.erase(
      std::remove_if(pieces_.begin(), pieces_.end(), [](const Piece& piece) { return piece.bits == 0; }),
      pieces_.end());
  for (unsigned f = 0; f < fields; ++f) lowest_[f] = {static_cast<Field>(f), 0};
  for (const Piece& piece : pieces_) {
    if (piece.in_field == 0)
      lowest_[piece.field] = piece;
    else
      higher_.push_back(piece);
  }
}

// Its own inverse, since it leaves the row alone.
void DramAddressMap::hash(DramPlace& place) const {
  if (!hash_) return;
  place.bank ^= static_cast<unsigned>(place.row & bank_mask_);
  place.group ^= static_cast<unsigned>(place.row >> bank_bits_ & group_mask_);
}

DramPlace DramAddressMap::place(std::uint64_t burst) const {
  const auto value = [&](Field field) {
    std::uint64_t bits = burst >> lowest_[field].in_burst & lowest_[field].mask;
    for (const Piece& piece : higher_)
      if (piece.field == field) bits |= (burst >> piece.in_burst & piece.mask) << piece.in_field;
    return bits;
  };
  DramPlace place{static_cast<unsigned>(value(channel)),
                  static_cast<unsigned>(value(rank)),
                  static_cast<unsigned>(value(group)),
                  static_cast<unsigned>(value(bank)),
                  value(row),
                  value(column)};
  hash(place);
  return place;
}

std::uint64_t DramAddressMap::burst(const DramPlace& place) const {
  DramPlace plain = place;
  hash(plain);
  const std::array<std::uint64_t, fields> value{plain.channel, plain.rank, plain.group,
                                                plain.bank,    plain.row,  plain.column};
  std::uint64_t burst = 0;
  for (const Piece& piece : pieces_)
    burst |= (value[piece.field] >> piece.in_field & piece.mask) << piece.in_burst;
  return burst;
}

}  // namespace earshot
