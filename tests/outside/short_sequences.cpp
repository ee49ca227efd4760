// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Short sequences that textbooks use to show a protocol, through the real simulator: the state after each
// access, the bus transaction, who supplied the line, and how many transactions there were.
//
// The MSI sequence (P1 reads, P3 reads, P3 writes, P1 reads, P2 reads u) is the example of D. E. Culler, J.
// P. Singh, "Parallel Computer Architecture", 1999, chapter 5. Its runs under MESI, Firefly and Dragon are
// derived from M. J. Flynn, "Computer Architecture: Pipelined and Parallel Processor Design", 1995, tables
// F.5, F.9, F.10 and F.11. The others are common textbook examples. Values written are ours where the source
// names none; the cells of a step are: memory | P1 | P2 | P3.
#include <catch2/catch.hpp>

#include "book_example.h"
#include "known_differences.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr int P1 = 0, P2 = 1, P3 = 2;
constexpr int first = 0, second = 1;  // P0 and P1 of sources that count from 0
constexpr AccessOp reads = AccessOp::read, writes = AccessOp::write;

}  // namespace

// The steps are tables.
// clang-format off
TEST_CASE("MSI follows the five-step example of Culler and Singh", "[outside]") {
  BookExample example(load_table("msi"), 3, {{"S", "S"}, {"M", "M"}});
  example.check({
      {P1, reads,     5, "5 | 5 S   | -   | -  ", "read from memory"},
      {P3, reads,     5, "5 | 5 S   | -   | 5 S", "read from memory"},
      {P3, writes,    7, "5 | 5 INV | -   | 7 M", known_difference("msi: write to a shared copy").ours},
      {P1, reads,     7, "7 | 7 S   | -   | 7 S", "read from owner, block to memory"},
      {P2, reads,     7, "7 | 7 S   | 7 S | 7 S", "read from memory"},
  });
  CHECK(example.system().transactions() == 5);
}

TEST_CASE("MESI on the five-step example needs five transactions and ends in S S S", "[outside]") {
  BookExample example(load_table("mesi"), 3, {{"E", "E"}, {"S", "S"}, {"M", "M"}});
  const char* const clean = known_difference("mesi: read of a line that another cache holds clean").ours;
  example.check({
      {P1, reads,     5, "5 | 5 E   | -   | -  ", "read from memory"},
      {P3, reads,     5, "5 | 5 S   | -   | 5 S", clean},
      {P3, writes,    7, "5 | 5 INV | -   | 7 M", "upgrade"},
      {P1, reads,     7, "7 | 7 S   | -   | 7 S", "read from owner, block to memory"},
      {P2, reads,     7, "7 | 7 S   | 7 S | 7 S", clean},
  });
  CHECK(example.system().transactions() == 5);
}

TEST_CASE("Firefly on the five-step example needs four transactions and writes memory at once", "[outside]") {
  BookExample example(load_table("firefly"), 3, {{"VE", "E"}, {"S", "S"}, {"D", "D"}});
  example.check({
      {P1, reads,     5, "5 | 5 E | -   | -  ", "read from memory"},
      {P3, reads,     5, "5 | 5 S | -   | 5 S", "read from sharer"},
      {P3, writes,    7, "7 | 7 S | -   | 7 S", "write-through, word to memory"},
      {P1, reads,     7, "7 | 7 S | -   | 7 S", "-"},
      {P2, reads,     7, "7 | 7 S | 7 S | 7 S", "read from sharer"},
  });
  CHECK(example.system().transactions() == 4);
}

TEST_CASE("Dragon on the five-step example needs four transactions and the owner answers for stale memory",
          "[outside]") {
  BookExample example(load_table("dragon"), 3, {{"E", "E"}, {"Sc", "Sc"}, {"Sm", "Sm"}, {"M", "M"}});
  example.check({
      {P1, reads,     5, "5 | 5 E  | -    | -   ", "read from memory"},
      {P3, reads,     5, "5 | 5 Sc | -    | 5 Sc",
       known_difference("dragon: read of a line that another cache holds clean").ours},
      {P3, writes,    7, "5 | 7 Sc | -    | 7 Sm", "update"},
      {P1, reads,     7, "5 | 7 Sc | -    | 7 Sm", "-"},
      {P2, reads,     7, "5 | 7 Sc | 7 Sc | 7 Sm", "read from owner"},
  });
  CHECK(example.system().transactions() == 4);
}

// Common textbook example: write-through with invalidation, states V and I.
TEST_CASE("write-through with invalidation corrects memory and the other copy goes", "[outside]") {
  BookExample example(load_table(EARSHOT_SOURCE "/tests/outside/write-through-invalidate.table"), 3,
                      {{"VALID", "V"}});
  example.check({
      {P1, reads,     0, "0 | 0 V | -   | -    ", "read from memory"},
      {P3, reads,     0, "0 | 0 V | -   | 0 V  ", "read from memory"},
      {P1, writes,    5, "5 | 5 V | -   | 0 INV", "write-through, word to memory"},
      {P2, reads,     5, "5 | 5 V | 5 V | -    ", "read from memory"},
  });
}

// Common textbook example: why MESI has an E.
TEST_CASE("MSI needs two transactions to read and write a line that nobody shares", "[outside]") {
  BookExample example(load_table("msi"), 2, {{"S", "S"}, {"M", "M"}});
  example.check({
      {first,  reads,     0, "0 | 0 S | -", "read from memory"},
      {first,  writes,    1, "0 | 1 M | -", known_difference("msi: write to a shared copy").ours},
  });
  CHECK(example.system().transactions() == 2);
}

// Common textbook example: P0 reads and writes, then P1 reads.
TEST_CASE("MESI writes an exclusive copy silently and its holder supplies the next reader", "[outside]") {
  BookExample example(load_table("mesi"), 2, {{"E", "E"}, {"S", "S"}, {"M", "M"}});
  example.check({
      {first,  reads,     0, "0 | 0 E | -  ", "read from memory"},
      {first,  writes,    1, "0 | 1 M | -  ", "-"},
      {second, reads,     1, "1 | 1 S | 1 S", "read from owner, block to memory"},
  });
}

// Common textbook example: P0 reads, then P1 reads.
TEST_CASE("MESI ends in S S when a second cache reads an exclusive clean line", "[outside]") {
  BookExample example(load_table("mesi"), 2, {{"E", "E"}, {"S", "S"}, {"M", "M"}});
  example.check({
      {first,  reads,     0, "0 | 0 E | -  ", "read from memory"},
      {second, reads,     0, "0 | 0 S | 0 S",
       known_difference("mesi: read of a line that another cache holds clean").ours},
  });
}

// Common textbook example: one processor alone.
TEST_CASE("Firefly keeps a single processor's second read and its writes off the bus", "[outside]") {
  BookExample example(load_table("firefly"), 2, {{"VE", "E"}, {"S", "S"}, {"D", "M"}});
  example.check({
      {first,  reads,     0, "0 | 0 E | -", "read from memory"},
      {first,  reads,     0, "0 | 0 E | -", "-"},
      {first,  writes,    1, "0 | 1 M | -", "-"},
      {first,  reads,     1, "0 | 1 M | -", "-"},
  });
}
// clang-format on
