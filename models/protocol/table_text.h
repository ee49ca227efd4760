// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Private to this room: the three steps from a table's text to its compiled rows. read_table_text() knows
// words and layout, check_table_text() knows what makes sense, compile_table_text() fills in the defaults and
// expands the counting states. Problems of the first two are collected, so that a user sees all of them at
// once.
#pragma once

#include <string>
#include <vector>

#include "earshot/protocol/table.h"

namespace earshot {

// Everything wrong with one text, in the order of its lines.
class Problems {
 public:
  explicit Problems(std::string origin) : origin_(std::move(origin)) {}

  void add(int line, const std::string& what);
  bool none() const { return found_.empty(); }
  // "ORIGIN:LINE: what", one a line, sorted by line.
  std::string text() const;

 private:
  struct Problem {
    int line;
    std::string what;
  };
  std::string origin_;
  std::vector<Problem> found_;
};

struct StateText {
  std::string name;
  int line = 0;
  bool absent = false, readable = false, writable = false, owner = false, counts = false;
};

// The condition of a row: shared and alone are the bus's answer to a local event, below and at_limit the
// count of the copy an update arrives at.
enum class When { always, shared, alone, below, at_limit };

struct RowText {
  int line = 0;
  int state = 0;  // index into TableText::states, as is `next`
  Event event = Event::read;
  When when = When::always;
  int next = 0;
  bool uses_bus = false;
  BusKind bus = BusKind::read;
  bool again = false, supply = false, write_memory = false, take = false, count = false;
};

struct TableText {
  std::string name;
  int name_line = 0;
  Family family = Family::update;
  int family_line = 0;
  int limit = 0;
  int limit_line = 0;
  std::vector<StateText> states;
  std::vector<RowText> rows;
  bool complete = true;  // false: some line could not be understood, so missing rows mean nothing
};

struct CompiledTable {
  std::vector<State> states;
  std::vector<Row> rows;  // as Table::row() indexes them
};

constexpr int max_limit = 15;
constexpr int max_states = 200;

TableText read_table_text(const std::string& text, Problems& problems);
void check_table_text(const TableText& table, Problems& problems);
// REQUIRES: check_table_text() found no problem.
CompiledTable compile_table_text(const TableText& table);

// The compiled states that `table` needs with its limit.
int compiled_state_count(const TableText& table);

constexpr bool is_local(Event event) {
  return event <= Event::replace;
}
// How a table names a condition: "shared", "at-limit".
const char* name_of(When when);

}  // namespace earshot
