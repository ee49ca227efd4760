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

// clang-format off: the cases are tables
TEST_CASE("Dragon reaches exactly the pairs of states that may coexist", "[outside][protocol]") {
  check_matrix("dragon", {
                             {"I", "yyyyy"},
                             {"E", "ynnnn"},
                             {"Sc", "ynyyn"},
                             {"Sm", "ynynn"},
                             {"M", "ynnnn"},
                         });
}

TEST_CASE("write-once reaches exactly the pairs of states that may coexist", "[outside][protocol]") {
  check_matrix("write-once", {
                                 {"I", "yyyy"},
                                 {"V", "yynn"},
                                 {"R", "ynnn"},
                                 {"D", "ynnn"},
                             });
}

// clang-format on
}  // namespace earshot
