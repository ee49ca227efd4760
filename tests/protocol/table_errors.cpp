// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a user sees who wrote a table with a mistake in it: whole messages.
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "earshot/protocol/table.h"

namespace earshot {
namespace {

using Lines = std::vector<std::string>;

// clang-format off
// Correct tables that each case below spoils in one line.
const Lines invalidate = {
    "protocol t",                                   // 1
    "family   invalidate",                          // 2
    "state I absent",                               // 3
    "state S readable",                             // 4
    "state M readable writable owner",              // 5
    "I read                | bus read           | S",  // 6
    "I write               | bus read-exclusive | M",  // 7
    "S write               | bus upgrade        | M",  // 8
    "M replace             | bus write-back     | I",  // 9
    "M snoop-read          | supply, write-memory | S",  // 10
    "S snoop-read-exclusive |                   | I",  // 11
    "M snoop-read-exclusive | supply            | I",  // 12
    "S snoop-upgrade       |                    | I",  // 13
};
const Lines update = {
    "protocol t",                                // 1
    "family   update",                           // 2
    "limit    2",                                // 3
    "state I absent",                            // 4
    "state V readable counts",                   // 5
    "I read  shared | bus read          | V",    // 6
    "I read  alone  | bus read          | V",    // 7
    "I write        | bus read, again   | V",    // 8
    "V write        | bus write-through | V",    // 9
    "V snoop-write-through below    | take, count | V",  // 10
    "V snoop-write-through at-limit |             | I",  // 11
};
// clang-format on

std::string text_of(const Lines& lines) {
  std::string text;
  for (const std::string& line : lines) text += line + "\n";
  return text;
}

// What parsing says; empty if it is content.
std::string complaint(const std::string& text, int limit = 0) {
  try {
    Table::parse(text, "t.table", limit);
  } catch (const TableError& error) {
    return error.what();
  }
  return "";
}

struct Case {
  int line;  // replaced; 0 appends
  std::string text;
  std::string complaint;
};

void check_each(const Lines& good, const std::vector<Case>& cases) {
  REQUIRE(complaint(text_of(good)).empty());
  for (const Case& spoilt : cases) {
    Lines lines = good;
    if (spoilt.line == 0) {
      lines.push_back(spoilt.text);
    } else {
      lines[static_cast<std::size_t>(spoilt.line - 1)] = spoilt.text;
    }
    INFO("line " << spoilt.line << ": " << spoilt.text);
    CHECK(complaint(text_of(lines)) == spoilt.complaint);
  }
}

}  // namespace

TEST_CASE("a misspelt word is refused with the words that were expected and the nearest one", "[protocol]") {
  const std::vector<Case> in_invalidate = {
      {1, "protocl t",
       "t.table:1: unknown line 'protocl', expected protocol, family, limit, state or a row STATE EVENT "
       "[WHEN] | ACTIONS | NEXT; did you mean protocol?\n"
       "t.table:1: no line `protocol NAME`"},
      {2, "family invalid",
       "t.table:2: unknown family 'invalid', expected update, invalidate; did you mean invalidate?"},
      {5, "state M readable writeable owner",
       "t.table:5: unknown property 'writeable', expected absent, readable, writable, owner, counts; did you "
       "mean writable?"},
      {6, "I raed | bus read | S",
       "t.table:6: unknown event 'raed', expected read, write, replace, snoop-read, snoop-read-exclusive, "
       "snoop-upgrade, snoop-update, snoop-write-through, snoop-io-read, snoop-io-write; did you mean read?"},
      {6, "I read shred | bus read | S",
       "t.table:6: unknown condition 'shred', expected shared, alone, below, at-limit; did you mean shared?"},
      {6, "I read | bus raed | S",
       "t.table:6: unknown bus transaction 'raed', expected read, read-exclusive, upgrade, update, "
       "write-through, write-back; did you mean read?"},
      {10, "M snoop-read | suply, write-memory | S",
       "t.table:10: unknown action 'suply', expected bus, again, supply, write-memory, take, count; did you "
       "mean supply?"},
      {8, "Shared write | bus upgrade | M", "t.table:8: unknown state 'Shared', expected I, S, M"},
      {8, "S write | bus upgrade | N", "t.table:8: unknown state 'N', expected I, S, M"},
      {0, "T read | | T", "t.table:14: unknown state 'T', expected I, S, M"},
  };
  check_each(invalidate, in_invalidate);
}

TEST_CASE("a line that does not fit the layout is refused with the layout that was expected", "[protocol]") {
  const std::string row = "expected a row STATE EVENT [WHEN] | ACTIONS | NEXT";
  const std::vector<Case> in_invalidate = {
      {6, "I read | bus read", "t.table:6: " + row},
      {6, "I read | bus read | S | S", "t.table:6: " + row},
      {6, "I | bus read | S", "t.table:6: " + row},
      {6, "I read shared alone | bus read | S", "t.table:6: " + row},
      {6, "I read | bus read |", "t.table:6: " + row},
      {6, "I read | bus | S",
       "t.table:6: expected one kind of transaction: bus "
       "read|read-exclusive|upgrade|update|write-through|write-back"},
      {6, "I read | bus read, | S", "t.table:6: an action is missing beside a comma"},
      {6, "I read | bus read, bus read | S", "t.table:6: a row issues at most one bus transaction"},
      {10, "M snoop-read | supply write-memory | S",
       "t.table:10: expected a comma between actions, before 'write-memory'"},
      {10, "M snoop-read | supply, supply | S", "t.table:10: action supply is named twice"},
      {4, "state S readable readable", "t.table:4: property readable is named twice"},
      {4, "state 4 readable",
       "t.table:4: expected `state NAME PROPERTY...`, a name of letters, digits, - and _ that begins with a "
       "letter\n"
       "t.table:6: unknown state 'S', expected I, M\n"
       "t.table:8: unknown state 'S', expected I, M\n"
       "t.table:10: unknown state 'S', expected I, M\n"
       "t.table:11: unknown state 'S', expected I, M\n"
       "t.table:13: unknown state 'S', expected I, M"},
      {1, "protocol two words",
       "t.table:1: expected `protocol NAME`, a name of letters, digits, - and _ that begins with a letter"},
      {2, "family", "t.table:2: expected `family update` or `family invalidate`"},
      {0, "state bin\x01\x02ry",
       "t.table:14: expected `state NAME PROPERTY...`, a name of letters, digits, - and _ that begins with a "
       "letter"},
      {0, "\x01garbage",
       "t.table:14: unknown line '?garbage', expected protocol, family, limit, state or a row STATE EVENT "
       "[WHEN] | ACTIONS | NEXT"},
  };
  check_each(invalidate, in_invalidate);
  const std::vector<Case> in_update = {
      {3, "limit", "t.table:3: expected `limit N`, a whole number from 1 to 15"},
      {3, "limit 0", "t.table:3: expected `limit N`, a whole number from 1 to 15"},
      {3, "limit 16", "t.table:3: expected `limit N`, a whole number from 1 to 15"},
      {3, "limit -1", "t.table:3: expected `limit N`, a whole number from 1 to 15"},
      {3, "limit 99999999999999999999", "t.table:3: expected `limit N`, a whole number from 1 to 15"},
  };
  check_each(update, in_update);
}

TEST_CASE("what is said twice is refused with the line that said it first", "[protocol]") {
  const std::vector<Case> in_invalidate = {
      {0, "protocol u", "t.table:14: second line `protocol`, the first is line 1"},
      {0, "family update", "t.table:14: second line `family`, the first is line 2"},
      {0, "state S readable", "t.table:14: state S again, it was declared in line 4"},
      {0, "S write | bus upgrade | M", "t.table:14: second row for S write, the first is line 8"},
      {0, "S snoop-upgrade | | S", "t.table:14: second row for S snoop-upgrade, the first is line 13"},
      {0, "state J absent", "t.table:14: state J is a second absent state, the first is I in line 3"},
  };
  check_each(invalidate, in_invalidate);
  const std::vector<Case> in_update = {
      {0, "limit 3", "t.table:12: second line `limit`, the first is line 3"},
      {0, "I read alone | bus read | V", "t.table:12: second row for I read alone, the first is line 7"},
      {0, "I read | bus read | V", "t.table:12: second row for I read, the first is line 6"},
  };
  check_each(update, in_update);
}

TEST_CASE("what is missing is refused with what was expected", "[protocol]") {
  CHECK(complaint("") ==
        "t.table:1: no line `protocol NAME`\n"
        "t.table:1: no line `family update` or `family invalidate`\n"
        "t.table:1: no state is absent, expected exactly one: `state I absent`");
  const std::vector<Case> in_invalidate = {
      {9, "",
       "t.table:5: state M is an owner without a replace row, expected `M replace | bus write-back | I`"},
      {6, "I read shared | bus read | S", "t.table:6: row for I read shared without one for alone"},
      {6, "I read alone | bus read | S", "t.table:6: row for I read alone without one for shared"},
      {2, "family update", "t.table:2: no row takes a broadcast word, so this table is not `family update`"},
  };
  check_each(invalidate, in_invalidate);
  const std::vector<Case> in_update = {
      {3, "",
       "t.table:5: state V counts, so the table needs a line `limit N`\n"
       "t.table:10: below needs a line `limit N`\n"
       "t.table:11: at-limit needs a line `limit N`"},
      {5, "state V readable",
       "t.table:3: `limit` without a state that has the property counts\n"
       "t.table:10: count needs a next state with the property counts, V has not"},
      {10, "V snoop-write-through below | take | V",
       "t.table:3: `limit` without a row that has the action count"},
      {11, "", "t.table:10: row for V snoop-write-through below without one for at-limit"},
      {10, "",
       "t.table:2: no row takes a broadcast word, so this table is not `family update`\n"
       "t.table:3: `limit` without a row that has the action count\n"
       "t.table:11: row for V snoop-write-through at-limit without one for below"},
  };
  check_each(update, in_update);
}

TEST_CASE("properties of a state that contradict each other are refused", "[protocol]") {
  const std::vector<Case> in_invalidate = {
      {3, "state I absent readable",
       "t.table:3: state I is absent: it holds no copy, so it has no other property"},
      {0, "state X", "t.table:14: state X holds a copy, so it must be readable (or absent)"},
      {0, "state X writable", "t.table:14: state X holds a copy, so it must be readable (or absent)"},
      {9, "M replace | | I", "t.table:9: state M is an owner, so replacing it needs bus write-back"},
      {9, "M replace | bus upgrade | I",
       "t.table:9: state M is an owner, so replacing it needs bus write-back"},
      {0, "M write | bus upgrade | M",
       "t.table:14: state M is writable, so a write in it uses no bus transaction"},
      {8, "S write | | M", "t.table:8: a write without a bus transaction needs a writable state, S is not"},
      {0, "S replace | bus write-back | I",
       "t.table:14: state S is not an owner, so replacing it uses no bus transaction"},
      {0, "S read | bus read | S",
       "t.table:14: state S is readable, so a read in it uses no bus transaction"},
  };
  check_each(invalidate, in_invalidate);
  const std::vector<Case> in_update = {
      {0, "state W readable writable counts",
       "t.table:12: state W is writable, so it is the only copy and no update can reach it to be counted"},
  };
  check_each(update, in_update);
}

TEST_CASE("an action or condition that does not fit its event is refused", "[protocol]") {
  const std::vector<Case> in_invalidate = {
      {6, "I read | bus read, again | S", "t.table:6: again belongs to a write"},
      {6, "I read | bus read, supply | S",
       "t.table:6: supply answers another cache, so it belongs to a snoop row"},
      {6, "I read | bus read, write-memory | S",
       "t.table:6: write-memory answers another cache, so it belongs to a snoop row"},
      {6, "I read | bus read, take | S",
       "t.table:6: take answers another cache, so it belongs to a snoop row"},
      {6, "I read | bus read, count | S",
       "t.table:6: count answers another cache, so it belongs to a snoop row"},
      {6, "I read | bus upgrade | S",
       "t.table:6: a read fetches the line, expected bus read or bus read-exclusive"},
      {6, "I read | | S", "t.table:6: a read in the absent state needs the line, expected bus read"},
      {6, "I read | bus read | I", "t.table:6: a read must end in a readable state, I is not"},
      {7, "I write | bus upgrade | M",
       "t.table:7: bus upgrade needs a copy, I holds none; expected bus read-exclusive, or bus read, again"},
      {7, "I write | bus update | M",
       "t.table:7: bus update needs a copy, I holds none; expected bus read-exclusive, or bus read, again"},
      {7, "I write | bus write-through | M",
       "t.table:7: bus write-through brings no copy, expected next I (no allocation) or bus read, again"},
      {7, "I write | bus write-back | M", "t.table:7: bus write-back belongs to a replace row"},
      {7, "I write | bus read-exclusive | I",
       "t.table:7: the written value would be lost: a write that ends in I must be a bus write-through"},
      {7, "I write | bus read, again | I",
       "t.table:7: again needs a fetched copy: bus read or bus read-exclusive, and a readable next state"},
      {8, "S write | bus upgrade, again | M",
       "t.table:8: again needs a fetched copy: bus read or bus read-exclusive, and a readable next state"},
      {9, "M replace | bus write-back | S",
       "t.table:9: replace gives the copy up, expected the absent state as next"},
      {0, "I replace | | I", "t.table:14: state I holds no copy to replace, remove the row"},
      {0, "I snoop-read | | I", "t.table:14: a cache in state I is not asked by the bus, remove the row"},
      {10, "M snoop-read | bus write-back | S", "t.table:10: a snoop row cannot issue a bus transaction"},
      {10, "M snoop-read | again | S", "t.table:10: again belongs to a write"},
      {10, "M snoop-read | write-memory | S",
       "t.table:10: write-memory needs supply: memory takes the supplied line"},
      {10, "M snoop-read | supply, take | S",
       "t.table:10: no word is broadcast in a snoop-read, take belongs to snoop-update, "
       "snoop-write-through and snoop-io-write\n"
       "t.table:10: take belongs to the update family, this table is `family invalidate`"},
      {13, "S snoop-upgrade | supply | I",
       "t.table:13: nobody asks for the line in a snoop-upgrade, supply belongs to snoop-read, "
       "snoop-read-exclusive and snoop-io-read, or with write-memory to snoop-io-write"},
      {0, "S snoop-update | take | S",
       "t.table:14: take belongs to the update family, this table is `family invalidate`"},
      {10, "M snoop-read shared | supply | S",
       "t.table:10: shared is what other caches answer to the transaction of a read or write\n"
       "t.table:10: row for M snoop-read shared without one for alone"},
      {9, "M replace alone | bus write-back | I",
       "t.table:9: alone is what other caches answer to the transaction of a read or write\n"
       "t.table:9: row for M replace alone without one for shared"},
      {10, "M snoop-read below | supply | S",
       "t.table:10: below belongs to snoop-update, snoop-write-through and snoop-io-write\n"
       "t.table:10: row for M snoop-read below without one for at-limit"},
  };
  check_each(invalidate, in_invalidate);
  const std::vector<Case> in_update = {
      {7, "I read alone | bus read-exclusive | V",
       "t.table:7: I read alone and line 6 issue different transactions, but their answer comes after the "
       "transaction"},
      {11, "V snoop-write-through at-limit | count | V", "t.table:11: count needs the condition below"},
      {11, "V snoop-write-through at-limit | take | I", "t.table:11: take needs a copy, next is I"},
  };
  check_each(update, in_update);
}

TEST_CASE("every problem of a text is reported at once, in the order of its lines", "[protocol]") {
  CHECK(complaint("protocol t\n"
                  "I read | bus reed | S   # unknown\n"
                  "\n"
                  "state I absent\n"
                  "state S readable sticky\n"
                  "I write | bus upgrade | S\n") ==
        "t.table:1: no line `family update` or `family invalidate`\n"
        "t.table:2: unknown bus transaction 'reed', expected read, read-exclusive, upgrade, update, "
        "write-through, write-back; did you mean read?\n"
        "t.table:5: unknown property 'sticky', expected absent, readable, writable, owner, counts\n"
        "t.table:6: bus upgrade needs a copy, I holds none; expected bus read-exclusive, or bus read, again");
}

TEST_CASE("a table that compiles to more than 200 states is refused", "[protocol]") {
  Lines lines = update;
  lines[2] = "limit 15";
  for (int i = 0; i < 13; ++i) lines.push_back("state C" + std::to_string(i) + " readable counts");
  CHECK(complaint(text_of(lines)) == "t.table:1: the table compiles to 211 states, at most 200 are possible");
  lines.pop_back();
  CHECK(complaint(text_of(lines)).empty());
}

TEST_CASE("a limit asked for beside the text is checked if the table counts and ignored if it does not",
          "[protocol]") {
  CHECK(complaint(text_of(update), 16) == "t.table: limit 16 was asked for, expected 1 to 15");
  CHECK(complaint(text_of(update), -1) == "t.table: limit -1 was asked for, expected 1 to 15");
  CHECK(Table::parse(text_of(update), "t.table", 3).limit() == 3);
  CHECK(Table::parse(text_of(update), "t.table").limit() == 2);
  CHECK(Table::parse(text_of(invalidate), "t.table", 16).limit() == 0);
}

TEST_CASE("line ends of other systems, tabs and a byte order mark are no mistakes", "[protocol]") {
  std::string text = "\xef\xbb\xbf";
  for (const std::string& line : invalidate) text += "\t" + line + "\r\n";
  CHECK(Table::parse(text, "t.table").dump() == Table::parse(text_of(invalidate), "t.table").dump());
}

TEST_CASE("a name that is neither a built-in table nor a file is refused with the nearest table",
          "[protocol]") {
  const std::string known =
      ": neither a built-in table nor a file; built-in are write-through-update, dirty-owner-update, dragon, "
      "firefly, competitive-update, msi, mesi, moesi, berkeley, write-once";
  CHECK_THROWS_WITH(load_table("dargon"), "dargon" + known + "; did you mean dragon?");
  CHECK_THROWS_WITH(load_table("/nowhere/at/all"), "/nowhere/at/all" + known);
  CHECK_THROWS_WITH(load_table(EARSHOT_TEST_DATA),
                    std::string(EARSHOT_TEST_DATA) + ": is a directory, expected a table file");
  CHECK_THROWS_WITH(load_table("/dev/zero"), "/dev/zero: more than 1 MiB, too long for a protocol table");
}

}  // namespace earshot
