// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Damaged text must not get further than the parser, or be a table that can be proved or refuted like any
// other.
#include <catch2/catch.hpp>
#include <random>
#include <sstream>
#include <string>
#include <vector>

#include "earshot/protocol/prover.h"

namespace earshot {
namespace {

std::vector<std::string> lines_of(const std::string& text) {
  std::istringstream in(text);
  std::vector<std::string> lines;
  for (std::string line; std::getline(in, line);) lines.push_back(line);
  return lines;
}

// The same draw everywhere: std::uniform_int_distribution may differ from one library to the next.
std::size_t below(std::mt19937& random, std::size_t bound) {
  return random() % bound;
}

// One damage: a line lost, doubled or moved, two words exchanged, a byte overwritten.
std::string damaged(const std::string& text, std::mt19937& random) {
  std::vector<std::string> lines = lines_of(text);
  std::string& line = lines[below(random, lines.size())];
  const std::string& other = lines[below(random, lines.size())];
  switch (below(random, 5)) {
    case 0:
      line.clear();
      break;
    case 1:
      lines.push_back(line);
      break;
    case 2:
      std::swap(line, lines[below(random, lines.size())]);
      break;
    case 3: {
      std::istringstream from(line), into(other);
      std::string word, replacement;
      for (std::size_t i = below(random, 6); i > 0; --i) from >> word;
      for (std::size_t i = below(random, 6); i > 0; --i) into >> replacement;
      const std::size_t at = line.find(word);
      if (at != std::string::npos) line.replace(at, word.size(), replacement);
      break;
    }
    case 4:
      if (!line.empty()) line[below(random, line.size())] = static_cast<char>(below(random, 256));
      break;
  }
  std::string joined;
  for (const std::string& l : lines) joined += l + "\n";
  return joined;
}

}  // namespace

TEST_CASE("a damaged table is refused with its line or is a table like any other", "[protocol]") {
  constexpr unsigned seed = 1;
  std::mt19937 random(seed);
  int refused = 0, sound = 0, unsound = 0;
  for (const std::string& name : builtin_tables()) {
    for (int round = 0; round < 400; ++round) {
      std::string text = builtin_table_text(name);
      for (std::size_t damages = 1 + below(random, 3); damages > 0; --damages) text = damaged(text, random);
      INFO("seed " << seed << ", " << name << ", round " << round << ":\n" << text);
      try {
        const Table table = Table::parse(text, "damaged");
        const Proof proof = prove(table, 2);
        ++(proof.sound ? sound : unsound);
        CHECK(proof.sound == proof.violation.empty());
        CHECK(proof.sound == proof.steps.empty());
      } catch (const TableError& error) {
        ++refused;
        CHECK(std::string(error.what()).compare(0, 8, "damaged:") == 0);
      }
    }
  }
  // Damage in comments is harmless and damage in rows is not: all three must happen, or the damage is too
  // tame.
  CHECK(refused > 100);
  CHECK(sound > 100);
  CHECK(unsound > 100);
}

}  // namespace earshot
