// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a table must say to make sense, short of being sound: that is the prover's business. Each rule here
// catches a slip that the prover could only report as a puzzling counterexample, or not at all.
#include <algorithm>

#include "earshot/protocol/table_text.h"

namespace earshot {
namespace {

bool is_fetch(const RowText& row) {
  return row.uses_bus && (row.bus == BusKind::read || row.bus == BusKind::read_exclusive);
}

bool receives_word(Event event) {
  return event == Event::snoop_update || event == Event::snoop_write_through || event == Event::snoop_io_write;
}

class Checker {
 public:
  Checker(const TableText& table, Problems& problems) : table_(table), problems_(problems) {}

  void check() {
    check_header();
    for (const StateText& state : table_.states) check_state(state);
    check_one_absent_state();
    for (const RowText& row : table_.rows) check_row(row);
    for (std::size_t i = 0; i < table_.rows.size(); ++i) check_not_given_before(i);
    if (!table_.complete) return;  // what follows is about missing rows
    for (const RowText& row : table_.rows) check_partner(row);
    for (const StateText& state : table_.states) check_owner_can_leave(state);
    check_family();
    check_counting();
  }

 private:
  void check_header() {
    if (table_.name_line == 0) problems_.add(1, "no line `protocol NAME`");
    if (table_.family_line == 0) problems_.add(1, "no line `family update` or `family invalidate`");
    const int states = compiled_state_count(table_);
    if (states > max_states) {
      problems_.add(1, "the table compiles to " + std::to_string(states) + " states, at most " +
                           std::to_string(max_states) + " are possible");
    }
  }

  void check_state(const StateText& state) {
    const std::string name = "state " + state.name;
    if (state.absent) {
      if (state.readable || state.writable || state.owner || state.counts) {
        problems_.add(state.line, name + " is absent: it holds no copy, so it has no other property");
      }
      return;
    }
    if (!state.readable) {
      problems_.add(state.line, name + " holds a copy, so it must be readable (or absent)");
    }
    if (state.writable && state.counts) {
      problems_.add(state.line,
                    name + " is writable, so it is the only copy and no update can reach it to be counted");
    }
    if (state.counts && table_.limit_line == 0) {
      problems_.add(state.line, name + " counts, so the table needs a line `limit N`");
    }
  }

  void check_one_absent_state() {
    const StateText* first = nullptr;
    for (const StateText& state : table_.states) {
      if (!state.absent) continue;
      if (first != nullptr) {
        problems_.add(state.line, "state " + state.name + " is a second absent state, the first is " +
                                      first->name + " in line " + std::to_string(first->line));
      } else {
        first = &state;
      }
    }
    if (first == nullptr) problems_.add(1, "no state is absent, expected exactly one: `state I absent`");
  }

  void check_row(const RowText& row) {
    if (is_local(row.event)) {
      if (row.supply) misplaced(row, "supply");
      if (row.write_memory) misplaced(row, "write-memory");
      if (row.take) misplaced(row, "take");
      if (row.count) misplaced(row, "count");
      if (row.again && row.event != Event::write) problems_.add(row.line, "again belongs to a write");
    }
    if (row.event == Event::read) {
      check_read(row);
    } else if (row.event == Event::write) {
      check_write(row);
    } else if (row.event == Event::replace) {
      check_replace(row);
    } else {
      check_snoop(row);
    }
    check_condition(row);
  }

  void misplaced(const RowText& row, const std::string& action) {
    problems_.add(row.line, action + " answers another cache, so it belongs to a snoop row");
  }

  void check_read(const RowText& row) {
    if (state(row).absent && !row.uses_bus) {
      problems_.add(row.line, "a read in the absent state needs the line, expected bus read");
    }
    if (!state(row).absent && row.uses_bus) {
      problems_.add(row.line,
                    "state " + state(row).name + " is readable, so a read in it uses no bus transaction");
    }
    if (row.uses_bus && !is_fetch(row)) {
      problems_.add(row.line, "a read fetches the line, expected bus read or bus read-exclusive");
    }
    if (next(row).absent) {
      problems_.add(row.line, "a read must end in a readable state, " + next(row).name + " is not");
    }
  }

  void check_write(const RowText& row) {
    if (!row.uses_bus && !state(row).writable) {
      problems_.add(row.line, "a write without a bus transaction needs a writable state, " + state(row).name +
                                  " is not");
    }
    if (row.uses_bus && state(row).writable) {
      problems_.add(row.line,
                    "state " + state(row).name + " is writable, so a write in it uses no bus transaction");
    }
    if (row.uses_bus && row.bus == BusKind::write_back) {
      return problems_.add(row.line, "bus write-back belongs to a replace row");
    }
    if (row.again && (!is_fetch(row) || next(row).absent)) {
      problems_.add(row.line,
                    "again needs a fetched copy: bus read or bus read-exclusive, and a readable next state");
    } else if (row.uses_bus && !is_fetch(row) && state(row).absent) {
      check_write_without_copy(row);
    } else if (next(row).absent && !(row.uses_bus && row.bus == BusKind::write_through)) {
      problems_.add(row.line, "the written value would be lost: a write that ends in " + next(row).name +
                                  " must be a bus write-through");
    }
  }

  // Only a write-through can do without a copy, and it brings none.
  void check_write_without_copy(const RowText& row) {
    if (row.bus != BusKind::write_through) {
      problems_.add(row.line, std::string("bus ") + name_of(row.bus) + " needs a copy, " + state(row).name +
                                  " holds none; expected bus read-exclusive, or bus read, again");
    } else if (!next(row).absent) {
      problems_.add(row.line, "bus write-through brings no copy, expected next " + state(row).name +
                                  " (no allocation) or bus read, again");
    }
  }

  void check_replace(const RowText& row) {
    if (state(row).absent) {
      return problems_.add(row.line,
                           "state " + state(row).name + " holds no copy to replace, remove the row");
    }
    if (!next(row).absent) {
      problems_.add(row.line, "replace gives the copy up, expected the absent state as next");
    }
    if (state(row).owner && !(row.uses_bus && row.bus == BusKind::write_back)) {
      problems_.add(row.line,
                    "state " + state(row).name + " is an owner, so replacing it needs bus write-back");
    }
    if (!state(row).owner && row.uses_bus) {
      problems_.add(row.line,
                    "state " + state(row).name + " is not an owner, so replacing it uses no bus transaction");
    }
  }

  void check_snoop(const RowText& row) {
    if (state(row).absent) {
      return problems_.add(
          row.line, "a cache in state " + state(row).name + " is not asked by the bus, remove the row");
    }
    if (row.uses_bus) problems_.add(row.line, "a snoop row cannot issue a bus transaction");
    if (row.again) problems_.add(row.line, "again belongs to a write");
    const bool under_word = row.event == Event::snoop_io_write && row.write_memory;
    if (row.supply && !under_word && (receives_word(row.event) || row.event == Event::snoop_upgrade)) {
      problems_.add(row.line, std::string("nobody asks for the line in a ") + name_of(row.event) +
                                  ", supply belongs to snoop-read, snoop-read-exclusive and snoop-io-read, or with "
                                  "write-memory to snoop-io-write");
    }
    if (row.write_memory && !row.supply) {
      problems_.add(row.line, "write-memory needs supply: memory takes the supplied line");
    }
    if (row.take && !receives_word(row.event)) {
      problems_.add(row.line, std::string("no word is broadcast in a ") + name_of(row.event) +
                                  ", take belongs to snoop-update, snoop-write-through and snoop-io-write");
    }
    if (row.take && next(row).absent) problems_.add(row.line, "take needs a copy, next is " + next(row).name);
    if (row.take && table_.family == Family::invalidate && table_.family_line != 0) {
      problems_.add(row.line, "take belongs to the update family, this table is `family invalidate`");
    }
    if (row.count) check_count(row);
  }

  void check_count(const RowText& row) {
    if (row.when != When::below) problems_.add(row.line, "count needs the condition below");
    if (!next(row).counts) {
      problems_.add(row.line,
                    "count needs a next state with the property counts, " + next(row).name + " has not");
    }
  }

  void check_condition(const RowText& row) {
    const bool snooped = row.uses_bus && row.bus != BusKind::write_back;
    if ((row.when == When::shared || row.when == When::alone) && !(is_local(row.event) && snooped)) {
      problems_.add(row.line, std::string(name_of(row.when)) +
                                  " is what other caches answer to the transaction of a read or write");
    }
    if (row.when != When::below && row.when != When::at_limit) return;
    if (!receives_word(row.event)) {
      problems_.add(row.line,
                    std::string(name_of(row.when)) +
                        " belongs to snoop-update, snoop-write-through and snoop-io-write");
    } else if (table_.limit_line == 0) {
      problems_.add(row.line, std::string(name_of(row.when)) + " needs a line `limit N`");
    }
  }

  void check_not_given_before(std::size_t index) {
    const RowText& row = table_.rows[index];
    for (std::size_t i = 0; i < index; ++i) {
      const RowText& other = table_.rows[i];
      const bool overlap = row.when == other.when || row.when == When::always || other.when == When::always;
      if (row.state != other.state || row.event != other.event || !overlap) continue;
      return problems_.add(
          row.line, "second row for " + title(row) + ", the first is line " + std::to_string(other.line));
    }
  }

  void check_partner(const RowText& row) {
    if (row.when == When::always) return;
    const When wanted = row.when == When::shared  ? When::alone
                        : row.when == When::alone ? When::shared
                        : row.when == When::below ? When::at_limit
                                                  : When::below;
    for (const RowText& other : table_.rows) {
      if (row.state != other.state || row.event != other.event || other.when != wanted) continue;
      const bool same = row.uses_bus == other.uses_bus && row.bus == other.bus;
      if (!same && row.line > other.line) {
        problems_.add(row.line,
                      title(row) + " and line " + std::to_string(other.line) +
                          " issue different transactions, but their answer comes after the transaction");
      }
      return;
    }
    problems_.add(row.line, "row for " + title(row) + " without one for " + name_of(wanted));
  }

  void check_owner_can_leave(const StateText& owner) {
    if (!owner.owner || owner.absent) return;
    const bool found = std::any_of(table_.rows.begin(), table_.rows.end(), [&](const RowText& row) {
      return &state(row) == &owner && row.event == Event::replace;
    });
    if (!found) {
      problems_.add(owner.line, "state " + owner.name + " is an owner without a replace row, expected `" +
                                    owner.name + " replace | bus write-back | I`");
    }
  }

  void check_family() {
    const bool takes =
        std::any_of(table_.rows.begin(), table_.rows.end(), [](const RowText& row) { return row.take; });
    if (table_.family == Family::update && table_.family_line != 0 && !takes) {
      problems_.add(table_.family_line,
                    "no row takes a broadcast word, so this table is not `family update`");
    }
  }

  void check_counting() {
    if (table_.limit_line == 0) return;
    const bool counts =
        std::any_of(table_.states.begin(), table_.states.end(), [](const StateText& s) { return s.counts; });
    const bool counted =
        std::any_of(table_.rows.begin(), table_.rows.end(), [](const RowText& row) { return row.count; });
    if (!counts) {
      problems_.add(table_.limit_line, "`limit` without a state that has the property counts");
    } else if (!counted) {
      problems_.add(table_.limit_line, "`limit` without a row that has the action count");
    }
  }

  // "Sc write shared"
  std::string title(const RowText& row) const {
    const std::string when = name_of(row.when);
    return state(row).name + " " + name_of(row.event) + (when.empty() ? "" : " " + when);
  }

  const StateText& state(const RowText& row) const {
    return table_.states[static_cast<std::size_t>(row.state)];
  }
  const StateText& next(const RowText& row) const {
    return table_.states[static_cast<std::size_t>(row.next)];
  }

  const TableText& table_;
  Problems& problems_;
};

}  // namespace

void check_table_text(const TableText& table, Problems& problems) {
  Checker(table, problems).check();
}

}  // namespace earshot
