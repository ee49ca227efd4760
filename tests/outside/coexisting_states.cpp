// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Which two states two caches may hold at once, for Dragon and write-once, against what the prover reaches.
// The matrices are common textbook material; they follow from the states' definitions in D. E. Culler, J. P.
// Singh, "Parallel Computer Architecture", 1999, section 5.3.3 (Dragon: E and M are only copies, at most one
// Sm, which may stand beside Sc) and in J. R. Goodman, "Using Cache Memory to Reduce Processor-Memory
// Traffic", ISCA 1983 (write-once: reserved and dirty copies are only copies).
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "earshot/protocol/prover.h"

namespace earshot {
namespace {

// One line per state: its name, then y or n for each state in the order of the lines.
using Matrix = std::vector<std::pair<std::string, std::string>>;

void check_matrix(const std::string& name, const Matrix& matrix) {
  const Table table = load_table(name);
  REQUIRE(table.states().size() == matrix.size());
  for (int caches = 2; caches <= 4; ++caches) {
    const Proof proof = prove(table, caches);
    REQUIRE(proof.sound);
    for (std::size_t a = 0; a < matrix.size(); ++a) {
      REQUIRE(table.states()[a].name == matrix[a].first);
      for (std::size_t b = 0; b < matrix.size(); ++b) {
        INFO(name << ", " << caches << " caches: " << matrix[a].first << " beside " << matrix[b].first);
        const bool reached = proof.coexisting.count({static_cast<StateId>(a), static_cast<StateId>(b)}) != 0;
        CHECK(reached == (matrix[a].second[b] == 'y'));
      }
    }
  }
}

}  // namespace

TEST_CASE("Dragon reaches exactly the pairs of states that may coexist", "[outside][protocol]") {
  // clang-format off
  const Matrix matrix = {
      {"I",  "yyyyy"},
      {"E",  "ynnnn"},
      {"Sc", "ynyyn"},
      {"Sm", "ynynn"},
      {"M",  "ynnnn"},
  };
  // clang-format on
  check_matrix("dragon", matrix);
}

TEST_CASE("write-once reaches exactly the pairs of states that may coexist", "[outside][protocol]") {
  const Matrix matrix = {
      {"I", "yyyy"},
      {"V", "yynn"},
      {"R", "ynnn"},
      {"D", "ynnn"},
  };
  check_matrix("write-once", matrix);
}

}  // namespace earshot
