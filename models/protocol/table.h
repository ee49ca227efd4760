// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Table is a coherence protocol as data: parsed from text, checked, and compiled into one dense array
// indexed [state][event][shared]. Caches ask it what to do and never name a protocol's state themselves.
// Immutable after construction; any number of caches and threads may share one.
//
// The text form is described in models/protocol/README.md.
#pragma once

#include <cstdint>
#include <stdexcept>
#include <string>
#include <vector>

#include "earshot/protocol/events.h"

namespace earshot {

using StateId = std::uint8_t;
constexpr StateId absent = 0;  // state 0 of every table: the cache holds no copy

// A state of the compiled table.
struct State {
  std::string name;       // as written; states of a counting family read "Sc/0", "Sc/1", ...
  bool readable = false;  // holds a copy that answers processor reads without the bus
  bool writable = false;  // may be written without the bus: must be the only copy
  bool owner = false;     // must supply the line to others and write it back when replaced
  bool fast_read = false;   // derived: a read hit needs no table walk (readable, and a read changes nothing)
  bool fast_write = false;  // derived: a write hit needs no table walk (writable, and a write changes nothing)
};

// What a table says about one state, event and shared answer.
struct Row {
  bool defined = false;       // false: the table has no such row; reaching it is an error
  StateId next = absent;
  bool uses_bus = false;      // local events only: a transaction of `bus` is issued first
  BusKind bus = BusKind::read;
  bool again = false;         // local read and write: after the transaction, judge the event again in `next`
  bool supply = false;        // snoop events: this copy answers with the line
  bool write_memory = false;  // snoop events, with supply: memory takes the supplied line in the same transaction
  bool take = false;          // snoop events: merge the broadcast word into this copy
  int line = 0;               // where the row stands in its text, for messages
};

enum class Family : std::uint8_t { update, invalidate };

// Every problem of one table text, each line of what() as "ORIGIN:LINE: what is wrong, what was expected".
class TableError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

class Table {
 public:
  // Parses and compiles `text`. `origin` is the file name used in messages.
  // `limit` overrides the text's `limit` line (1 to 15); 0 keeps it. Ignored by tables that do not count.
  // Throws TableError listing every problem found.
  static Table parse(const std::string& text, const std::string& origin, int limit = 0);

  const std::string& name() const { return name_; }
  Family family() const { return family_; }
  const std::vector<State>& states() const { return states_; }
  const State& state(StateId id) const { return states_[id]; }

  // True if the table counts updates received without a local use, so that `limit` means something to it.
  bool counts() const { return limit_ != 0; }
  int limit() const { return limit_; }
  // False: no row says what a copy does about an I/O port, so none can be on the bus.
  bool serves_io() const;

  // The row for a state, an event and the shared answer. For rows that use no bus, and for snoop events,
  // both answers give the same row.
  const Row& row(StateId state, Event event, bool shared) const {
    return rows_[(std::size_t{state} * events + static_cast<std::size_t>(event)) * 2 + (shared ? 1 : 0)];
  }

  // Test and mutation door: a copy of this table with one row replaced, unchecked. The row of the other answer is
  // replaced with it if the two were one row or `replacement` uses no bus; else it keeps its effect but issues the
  // replacement's transaction, because both answers to one transaction issue the same.
  Table with_row(StateId state, Event event, bool shared, const Row& replacement) const;

  // The compiled rows, one a line, in a stable form that tests compare.
  std::string dump() const;

 private:
  Table() = default;
  std::string name_;
  Family family_ = Family::update;
  int limit_ = 0;
  std::vector<State> states_;
  std::vector<Row> rows_;
};

// The names of the tables built into the library, in the order of every listing.
const std::vector<std::string>& builtin_tables();
// The text of a built-in table. REQUIRES: `name` is one of builtin_tables().
const std::string& builtin_table_text(const std::string& name);
// A built-in table by name, or else a table file by path. Throws TableError; an unknown name that is no file
// either is a TableError that names the nearest built-in table.
Table load_table(const std::string& name_or_path, int limit = 0);

}  // namespace earshot
