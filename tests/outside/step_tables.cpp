// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The step-by-step examples of H. El-Rewini and M. Abd-El-Barr, "Advanced Computer Architecture and Parallel
// Processing", Wiley 2005, chapter 4: two caches P and Q, one location X that holds 5, a fixed list of reads
// and updates. Values of memory and both caches and the states after each step, through the real simulator.
//
// Examples 2 and 3 are tables 4.4 and 4.6 of the book. Of examples 5 and 6 the list of operations is the
// book's; the values are derived from the rules of its tables 4.9 and 4.11. The column `bus` is derived from
// the rules of each example's table (4.3, 4.5, 4.9, 4.11). The cells of a step are: memory | P | Q.
#include <catch2/catch.hpp>

#include "book_example.h"
#include "earshot/protocol/prover.h"
#include "known_differences.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr int P = 0, Q = 1;
constexpr AccessOp reads = AccessOp::read, updates = AccessOp::write, replaced = AccessOp::replace;

const char* const write_through_invalidate = EARSHOT_SOURCE "/tests/outside/write-through-invalidate.table";

}  // namespace

// The steps are tables.
// clang-format off
TEST_CASE("write-invalidate with write-through follows El-Rewini's table 4.4, from a user's table file",
          "[outside]") {
  const Table table = load_table(write_through_invalidate);
  for (const int caches : {2, 3}) REQUIRE(prove(table, caches).sound);
  BookExample(table, 2, {{"VALID", "VALID"}}).check({
      {P, reads,     5, " 5 |  5 VALID |  -      ", "read from memory"},
      {Q, reads,     5, " 5 |  5 VALID |  5 VALID", "read from memory"},
      {Q, updates,  10, "10 |  5 INV   | 10 VALID", "write-through, word to memory"},
      {Q, reads,    10, "10 |  5 INV   | 10 VALID", "-"},
      {Q, updates,  15, "15 |  5 INV   | 15 VALID", "write-through, word to memory"},
      {P, updates,  20, "20 | 20 VALID | 15 INV  ", "read from memory, write-through, word to memory"},
      {Q, reads,    20, "20 | 20 VALID | 20 VALID", "read from memory"},
  });
}

TEST_CASE("MSI follows El-Rewini's table 4.6: a dirty line moves on a write miss and memory stays stale",
          "[outside]") {
  BookExample(load_table("msi"), 2, {{"S", "RO"}, {"M", "RW"}}).check({
      {P, reads,     5, " 5 |  5 RO  |  -    ", "read from memory"},
      {Q, reads,     5, " 5 |  5 RO  |  5 RO ", "read from memory"},
      {Q, updates,  10, " 5 |  5 INV | 10 RW ", "upgrade"},
      {Q, reads,    10, " 5 |  5 INV | 10 RW ", "-"},
      {Q, updates,  15, " 5 |  5 INV | 15 RW ", "-"},
      {P, updates,  20, " 5 | 20 RW  | 15 INV", "read-exclusive from owner"},
      {Q, reads,    20, "20 | 20 RO  | 20 RO ", "read from owner, block to memory"},
  });
}

TEST_CASE("Firefly follows El-Rewini's example 5: updates write memory while the line is shared",
          "[outside]") {
  BookExample(load_table("firefly"), 2, {{"VE", "VAL-X"}, {"S", "SHARE"}, {"D", "DIRTY"}}).check({
      {P, reads,     5, " 5 |  5 VAL-X |  -      ", "read from memory"},
      {P, updates,  10, " 5 | 10 DIRTY |  -      ", "-"},
      {Q, reads,    10, "10 | 10 SHARE | 10 SHARE", "read from owner, block to memory"},
      {Q, updates,  15, "15 | 15 SHARE | 15 SHARE", "write-through, word to memory"},
      {Q, reads,    15, "15 | 15 SHARE | 15 SHARE", "-"},
      {P, replaced,  0, "15 |  -       | 15 SHARE", "-"},
      {Q, updates,  20, "20 |  -       | 20 VAL-X", "write-through, word to memory"},
      {P, updates,  25, "25 | 25 SHARE | 25 SHARE", "read from sharer, write-through, word to memory"},
  });
}

TEST_CASE("Dragon follows El-Rewini's example 6: only the owner's replacement writes memory", "[outside]") {
  const KnownDifference& step_7 = known_difference("dragon: write to a shared copy that became the only one");
  const std::string after_step_7 = "15 | 20 " + std::string(step_7.ours) + " | -";
  BookExample example(load_table("dragon"), 2,
                      {{"E", "VAL-X"}, {"Sc", "SH-CLN"}, {"Sm", "SH-DRT"}, {"M", "DIRTY"}});
  example.check({
      {P, reads,     5, " 5 |  5 VAL-X  |  -       ", "read from memory"},
      {P, updates,  10, " 5 | 10 DIRTY  |  -       ", "-"},
      {Q, reads,    10, " 5 | 10 SH-DRT | 10 SH-CLN", "read from owner"},
      {Q, updates,  15, " 5 | 15 SH-CLN | 15 SH-DRT", "update"},
      {Q, reads,    15, " 5 | 15 SH-CLN | 15 SH-DRT", "-"},
      {Q, replaced,  0, "15 | 15 SH-CLN |  -       ", "write-back, block to memory"},
      {P, updates,  20, after_step_7.c_str(), "update"},
      {Q, updates,  25, "15 | 25 SH-CLN | 25 SH-DRT", "read from owner, update"},
  });
}
// clang-format on
