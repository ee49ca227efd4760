// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the compiler adds to the rows as written: defaults, counting states, the rows for both answers.
#include <catch2/catch.hpp>
#include <string>

#include "earshot/protocol/table.h"

namespace earshot {
namespace {

// A small table with every feature: a condition on the shared line, `again`, and a counting state.
std::string counting_text(int limit) {
  return "protocol small\n"
         "family   update\n"
         "limit    " +
         std::to_string(limit) +
         "\n"
         "state C readable counts\n"
         "state I absent\n"
         "state X readable writable owner\n"
         "I read                      | bus read          | C\n"
         "I write                     | bus read, again   | C\n"
         "C write shared              | bus write-through | C\n"
         "C write alone               | bus write-through | X\n"
         "X replace                   | bus write-back    | I\n"
         "X snoop-read                | supply, write-memory | C\n"
         "C snoop-read                |                   | C\n"
         "C snoop-write-through below | take, count       | C\n"
         "C snoop-write-through at-limit |                | I\n";
}

StateId id_of(const Table& table, const std::string& name) {
  for (std::size_t id = 0; id < table.states().size(); ++id) {
    if (table.states()[id].name == name) return static_cast<StateId>(id);
  }
  FAIL("no state " << name);
  return absent;
}

}  // namespace

TEST_CASE("the compiled table holds every row, the defaults included, in a stable form", "[protocol]") {
  CHECK(load_table("msi").dump() ==
        "protocol msi, family invalidate\n"
        "state I absent\n"
        "state S readable fast-read\n"
        "state M readable writable owner fast-read fast-write\n"
        "I read | bus read | S\n"
        "I write | bus read-exclusive | M\n"
        "S read |  | S\n"
        "S write | bus upgrade | M\n"
        "S replace |  | I\n"
        "S snoop-read |  | S\n"
        "S snoop-read-exclusive |  | I\n"
        "S snoop-upgrade |  | I\n"
        "S snoop-io-read |  | S\n"
        "S snoop-io-write |  | I\n"
        "M read |  | M\n"
        "M write |  | M\n"
        "M replace | bus write-back | I\n"
        "M snoop-read | supply, write-memory | S\n"
        "M snoop-read-exclusive | supply | I\n"
        "M snoop-io-read | supply | M\n"
        "M snoop-io-write | supply, write-memory | I\n");
}

TEST_CASE("a counting state becomes as many states as the limit says", "[protocol]") {
  CHECK(Table::parse(counting_text(3), "small").dump() ==
        "protocol small, family update, limit 3\n"
        "state I absent\n"
        "state C/0 readable fast-read\n"
        "state C/1 readable\n"
        "state C/2 readable\n"
        "state X readable writable owner fast-read fast-write\n"
        "I read | bus read | C/0\n"
        "I write | bus read, again | C/0\n"
        "C/0 read |  | C/0\n"
        "C/0 write shared | bus write-through | C/0\n"
        "C/0 write alone | bus write-through | X\n"
        "C/0 replace |  | I\n"
        "C/0 snoop-read |  | C/0\n"
        "C/0 snoop-write-through | take | C/1\n"
        "C/1 read |  | C/0\n"
        "C/1 write shared | bus write-through | C/0\n"
        "C/1 write alone | bus write-through | X\n"
        "C/1 replace |  | I\n"
        "C/1 snoop-read |  | C/1\n"
        "C/1 snoop-write-through | take | C/2\n"
        "C/2 read |  | C/0\n"
        "C/2 write shared | bus write-through | C/0\n"
        "C/2 write alone | bus write-through | X\n"
        "C/2 replace |  | I\n"
        "C/2 snoop-read |  | C/2\n"
        "C/2 snoop-write-through |  | I\n"
        "X read |  | X\n"
        "X write |  | X\n"
        "X replace | bus write-back | I\n"
        "X snoop-read | supply, write-memory | C/0\n");
}

TEST_CASE("a copy goes with exactly the limit-th update it receives without local use", "[protocol]") {
  for (int limit = 1; limit <= 4; ++limit) {
    INFO("limit " << limit);
    const Table table = load_table("competitive-update", limit);
    CHECK(table.limit() == limit);
    StateId state = id_of(table, "Sc/0");
    for (int update = 1; update <= limit; ++update) {
      const Row& row = table.row(state, Event::snoop_update, true);
      REQUIRE(row.defined);
      CHECK(row.take == (update < limit));
      state = row.next;
      REQUIRE((state == absent) == (update == limit));
      if (state == absent) break;
      CHECK(table.state(state).name == "Sc/" + std::to_string(update));
      CHECK(table.state(table.row(state, Event::read, false).next).name == "Sc/0");
      CHECK(table.row(state, Event::snoop_read, false).next == state);
    }
    // A former owner has counted nothing yet: the update that ends its ownership is its first.
    const Row& dethroned = table.row(id_of(table, "Sm"), Event::snoop_update, true);
    CHECK(table.state(dethroned.next).name == (limit == 1 ? "I" : "Sc/1"));
  }
}

TEST_CASE("a row without a condition answers for shared and alone", "[protocol]") {
  const Table table = load_table("mesi");
  for (const bool shared : {false, true}) {
    CHECK(table.row(absent, Event::write, shared).bus == BusKind::read_exclusive);
    CHECK(table.state(table.row(absent, Event::write, shared).next).name == "M");
  }
  CHECK(table.state(table.row(absent, Event::read, true).next).name == "S");
  CHECK(table.state(table.row(absent, Event::read, false).next).name == "E");
}

TEST_CASE("a compiled row knows the line of its text and a default row has none", "[protocol]") {
  const Table table = Table::parse(counting_text(2), "small");
  CHECK(table.row(absent, Event::read, false).line == 7);
  CHECK(table.row(id_of(table, "C/1"), Event::write, false).line == 10);
  CHECK(table.row(id_of(table, "C/1"), Event::read, false).line == 0);
}

TEST_CASE("replacing a row leaves the table a table", "[protocol]") {
  const Table mesi = load_table("mesi");
  const StateId e = id_of(mesi, "E"), s = id_of(mesi, "S"), m = id_of(mesi, "M");

  SECTION("a row written once for both answers is replaced for both") {
    Row row = mesi.row(absent, Event::write, false);
    row.next = e;
    const Table changed = mesi.with_row(absent, Event::write, true, row);
    CHECK(changed.row(absent, Event::write, false).next == e);
    CHECK(changed.row(absent, Event::write, true).next == e);
  }
  SECTION("one answer of a pair is replaced alone") {
    Row row = mesi.row(absent, Event::read, false);
    row.next = s;
    const Table changed = mesi.with_row(absent, Event::read, false, row);
    CHECK(changed.row(absent, Event::read, false).next == s);
    CHECK(changed.row(absent, Event::read, true).next == s);
    CHECK(mesi.row(absent, Event::read, false).next == e);
  }
  SECTION("but both answers still issue one transaction") {
    Row row = mesi.row(absent, Event::read, false);
    row.bus = BusKind::read_exclusive;
    const Table changed = mesi.with_row(absent, Event::read, false, row);
    CHECK(changed.row(absent, Event::read, true).bus == BusKind::read_exclusive);
    CHECK(changed.row(absent, Event::read, true).next == s);
  }
  SECTION("the shortcuts for hits follow the rows") {
    Row row = mesi.row(m, Event::write, false);
    row.next = e;
    CHECK(mesi.state(m).fast_write);
    CHECK_FALSE(mesi.with_row(m, Event::write, false, row).state(m).fast_write);
  }
}

}  // namespace earshot
