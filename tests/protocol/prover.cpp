// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/prover.h"

#include <catch2/catch.hpp>
#include <string>
#include <vector>

namespace earshot {
namespace {

// A built-in table with one line of its text exchanged, as a user would edit it; `row` is found by its
// beginning.
Table edited(const std::string& name, const std::string& row, const std::string& replacement) {
  std::string text = builtin_table_text(name);
  const std::size_t begin = text.find("\n  " + row) + 1;
  REQUIRE(begin != std::string::npos + 1);
  text.replace(begin, text.find('\n', begin) - begin, replacement);
  return Table::parse(text, "edited");
}

// The same with a row that the parser would not let pass.
Table forced(const Table& table, StateId state, Event event, bool shared, StateId next) {
  Row row = table.row(state, event, shared);
  row.next = next;
  return table.with_row(state, event, shared, row);
}

std::string account_of(const Table& table, int caches) {
  return describe(table, prove(table, caches));
}

}  // namespace

TEST_CASE("every built-in table is sound with 1 to 8 caches", "[protocol]") {
  for (const std::string& name : builtin_tables()) {
    const Table table = load_table(name, name == "competitive-update" ? 2 : 0);
    for (int caches = 1; caches <= 8; ++caches) {
      const Proof proof = prove(table, caches);
      INFO(describe(table, proof));
      CHECK(proof.sound);
      CHECK(proof.caches == caches);
      CHECK(proof.violation.empty());
      CHECK(proof.steps.empty());
    }
  }
}

TEST_CASE("competitive-update is sound with every limit", "[protocol]") {
  for (int limit = 1; limit <= 15; ++limit) {
    for (int caches = 1; caches <= 4; ++caches) {
      const Table table = load_table("competitive-update", limit);
      const Proof proof = prove(table, caches);
      INFO("limit " << limit << ": " << describe(table, proof));
      CHECK(proof.sound);
    }
  }
}

// Which states may stand together says how many global states there are. With n caches: any set of them may
// hold a clean shared copy (2^n ways); a copy that is alone stands in one of n caches; an owner among sharers
// stands in one of n caches, with any set of the others sharing (n * 2^(n-1)). In all ten tables the states
// of the copies decide whether memory is fresh, so memory adds nothing.
TEST_CASE("the number of reachable states is what the protocols' definitions say", "[protocol]") {
  struct Shape {
    const char* name;
    std::uint64_t alone;         // states that only an only copy has
    std::uint64_t owner_shares;  // 1 if an owner may stand among sharers
  };
  const std::vector<Shape> shapes = {{"write-through-update", 0, 0},
                                     {"dirty-owner-update", 0, 1},
                                     {"dragon", 2, 1},
                                     {"firefly", 2, 0},
                                     {"msi", 1, 0},
                                     {"mesi", 2, 0},
                                     {"moesi", 2, 1},
                                     {"berkeley", 1, 1},
                                     {"write-once", 2, 0}};
  for (const Shape& shape : shapes) {
    for (std::uint64_t n = 2; n <= 8; ++n) {
      INFO(shape.name << " with " << n << " caches");
      const Proof proof = prove(load_table(shape.name), static_cast<int>(n));
      const std::uint64_t sets = std::uint64_t{1} << n;
      CHECK(proof.unfolded_states == sets + shape.alone * n + shape.owner_shares * n * sets / 2);
      CHECK(proof.folded_states == n + 1 + shape.alone + shape.owner_shares * n);
    }
  }
}

TEST_CASE("a second owner is found with the shortest way to it", "[protocol]") {
  const Table table = edited("dirty-owner-update", "D     snoop-update", "D snoop-update | take | D");
  CHECK(account_of(table, 3) ==
        "dirty-owner-update: NOT sound with 3 caches: two owners: cache A in D and cache B in D\n"
        "  1. cache A writes: bus read (alone), bus update (alone); A I -> V -> D; memory stale\n"
        "  2. cache B writes: bus read (A supplies, shared), bus update (shared); B I -> V -> D; memory "
        "stale\n");
}

TEST_CASE("a silently writable copy beside another copy is found", "[protocol]") {
  const Table table = edited("msi", "M     snoop-read ", "M snoop-read | supply, write-memory | M");
  CHECK(account_of(table, 2) ==
        "msi: NOT sound with 2 caches: cache A in M may write without the bus, but cache B in S also has a "
        "copy\n"
        "  1. cache A writes: bus read-exclusive (alone); A I -> M; memory stale\n"
        "  2. cache B reads: bus read (A supplies, memory takes it, shared); B I -> S; memory up to date\n");
}

TEST_CASE("a copy that misses a write is found", "[protocol]") {
  const Table table = edited("dirty-owner-update", "V     snoop-update", "V snoop-update | | V");
  CHECK(
      account_of(table, 2) ==
      "dirty-owner-update: NOT sound with 2 caches: cache A in V can read a stale value\n"
      "  1. cache A reads: bus read (alone); A I -> V; memory up to date\n"
      "  2. cache B writes: bus read (shared), bus update (shared); B I -> V -> D; memory stale, A stale\n");
}

TEST_CASE("a fetch from stale memory is found", "[protocol]") {
  const Table table =
      edited("berkeley", "Shared-Dirty snoop-read ", "Shared-Dirty snoop-read | | Shared-Dirty");
  CHECK(account_of(table, 3) ==
        "berkeley: NOT sound with 3 caches: cache C in Valid can read a stale value\n"
        "  1. cache A writes: bus read-exclusive (alone); A Invalid -> Dirty; memory stale\n"
        "  2. cache B reads: bus read (A supplies, shared); A Dirty -> Shared-Dirty, B Invalid -> Valid; "
        "memory "
        "stale\n"
        "  3. cache C reads: bus read (shared); C Invalid -> Valid; memory stale, C stale\n");
}

TEST_CASE("stale memory that nobody owns is found", "[protocol]") {
  const Table table = edited("firefly", "D     snoop-read", "D snoop-read | supply | S");
  CHECK(account_of(table, 2) ==
        "firefly: NOT sound with 2 caches: nobody owns the line, but memory is stale\n"
        "  1. cache A writes: bus read (alone); A I -> VE -> D; memory stale\n"
        "  2. cache B reads: bus read (A supplies, shared); A D -> S, B I -> S; memory stale\n");
}

TEST_CASE("a missing row is found, for the bus and for the processor, and only if it is reached",
          "[protocol]") {
  const Table deaf = edited("msi", "S     snoop-upgrade", "");
  CHECK(account_of(deaf, 2) ==
        "msi: NOT sound with 2 caches: no row says what cache B in S does on snoop-upgrade\n"
        "  1. cache A reads: bus read (alone); A I -> S; memory up to date\n"
        "  2. cache B reads: bus read (shared); B I -> S; memory up to date\n"
        "  3. cache A writes: bus upgrade (B has no row); no state changes; memory up to date\n");
  CHECK(prove(deaf, 1).sound);
  CHECK(account_of(edited("msi", "S     write", ""), 2) ==
        "msi: NOT sound with 2 caches: no row says what cache A in S does on write\n"
        "  1. cache A reads: bus read (alone); A I -> S; memory up to date\n"
        "  2. cache A writes: no state changes; memory up to date\n");
}

TEST_CASE("an event that does not do its work is found", "[protocol]") {
  const Table msi = load_table("msi");
  const StateId s = 1, m = 2;
  CHECK(account_of(forced(msi, absent, Event::read, false, absent), 2) ==
        "msi: NOT sound with 2 caches: cache A's read ends without a copy, in I\n"
        "  1. cache A reads: bus read (alone); no state changes; memory up to date\n");
  CHECK(account_of(forced(msi, m, Event::replace, false, m), 2) ==
        "msi: NOT sound with 2 caches: cache A's replace keeps the copy, in M\n"
        "  1. cache A writes: bus read-exclusive (alone); A I -> M; memory stale\n"
        "  2. cache A replaces: bus write-back; no state changes; memory up to date\n");
  CHECK(prove(forced(msi, m, Event::write, false, s), 2).violation ==
        "nobody owns the line, but memory is stale");
  const Table endless = edited("msi", "S     write", "S write | bus read-exclusive, again | S");
  CHECK(prove(endless, 2).violation == "cache A's write is judged again without end");
  CHECK(prove(endless, 2).steps.size() == 2);
}

TEST_CASE("copies that coexist are reported in both orders", "[protocol]") {
  const std::set<std::pair<StateId, StateId>> expected = {{0, 0}, {0, 1}, {1, 0}, {0, 2}, {2, 0}, {1, 1}};
  CHECK(prove(load_table("msi"), 2).coexisting == expected);
  CHECK(prove(load_table("msi"), 1).coexisting.empty());
}

TEST_CASE("three caches show every pair of states that more caches show", "[protocol]") {
  for (const std::string& name : builtin_tables()) {
    INFO(name);
    const Table table = load_table(name);
    const auto three = prove(table, 3).coexisting;
    for (int caches = 4; caches <= 8; ++caches) CHECK(prove(table, caches).coexisting == three);
  }
}

TEST_CASE("a sound table's account fits 80 columns", "[protocol]") {
  CHECK(account_of(load_table("berkeley"), 3) ==
        "berkeley: sound with 3 caches\n"
        "  8 reachable states, 23 if the caches are told apart\n"
        "  may stand in two caches at once: Invalid+Invalid Invalid+Valid\n"
        "    Invalid+Shared-Dirty Invalid+Dirty Valid+Valid Valid+Shared-Dirty\n");
  CHECK(account_of(load_table("msi"), 1) ==
        "msi: sound with 1 cache\n"
        "  3 reachable states, 3 if the caches are told apart\n");
}

TEST_CASE("an I/O port that reads past the owner is told", "[protocol]") {
  const Table table = edited("msi", "M     snoop-io-read", "  M snoop-io-read | | M");
  CHECK(account_of(table, 2) ==
        "msi: NOT sound with 2 caches: the I/O port reads a stale value\n"
        "  1. cache A writes: bus read-exclusive (alone); A I -> M; memory stale\n"
        "  2. the I/O port reads: bus io-read (shared); no state changes; memory stale\n");
}

TEST_CASE("an I/O write that takes an owner's other bytes with it is told", "[protocol]") {
  const Table table = edited("mesi", "M     snoop-io-write", "  M snoop-io-write | | I");
  CHECK(account_of(table, 2) ==
        "mesi: NOT sound with 2 caches: nobody owns the line, but memory is stale\n"
        "  1. cache A writes: bus read-exclusive (alone); A I -> M; memory stale\n"
        "  2. the I/O port writes: bus io-write (alone); A M -> I; memory stale\n");
}

TEST_CASE("a copy that an I/O write does not reach is told", "[protocol]") {
  const Table table = edited("dragon", "Sc    snoop-io-write", "  Sc snoop-io-write | | Sc");
  const Proof proof = prove(table, 2);
  CHECK_FALSE(proof.sound);
  CHECK(proof.violation == "cache A in Sc can read a stale value");
}

TEST_CASE("a table without rows for an I/O port is proved without one", "[protocol]") {
  CHECK(load_table("mesi").serves_io());
  const Table table = Table::parse("protocol p\nfamily invalidate\nstate I absent\nstate S readable\n"
                                   "I read | bus read | S\nI write | bus write-through | I\nS write | bus write-through | S\n"
                                   "S snoop-read | | S\nS snoop-write-through | | I\n",
                                   "p");
  CHECK_FALSE(table.serves_io());
  CHECK(prove(table, 3).sound);
}

}  // namespace earshot
