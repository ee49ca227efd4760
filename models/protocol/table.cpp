// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/table.h"

#include <algorithm>
#include <iomanip>
#include <sstream>
#include <utility>

#include "earshot/protocol/table_text.h"

namespace earshot {
namespace {

bool same_effect(const Row& a, const Row& b) {
  return a.defined == b.defined && a.next == b.next && a.uses_bus == b.uses_bus &&
         (!a.uses_bus || a.bus == b.bus) && a.again == b.again && a.supply == b.supply &&
         a.write_memory == b.write_memory && a.take == b.take;
}

std::string actions_of(const Row& row) {
  std::string actions;
  const auto add = [&](bool present, const std::string& action) {
    if (present) actions += (actions.empty() ? "" : ", ") + action;
  };
  add(row.uses_bus, std::string("bus ") + name_of(row.bus));
  add(row.again, "again");
  add(row.supply, "supply");
  add(row.write_memory, "write-memory");
  add(row.take, "take");
  return actions;
}

// Recomputes which hits need no table walk.
void mark_fast_hits(std::vector<State>& states, const std::vector<Row>& rows) {
  for (std::size_t id = 0; id < states.size(); ++id) {
    const auto changes_nothing = [&](Event event) {
      const std::size_t first = (id * events + static_cast<std::size_t>(event)) * 2;
      return std::all_of(&rows[first], &rows[first] + 2,
                         [&](const Row& row) { return row.defined && !row.uses_bus && row.next == id; });
    };
    states[id].fast_read = states[id].readable && changes_nothing(Event::read);
    states[id].fast_write = states[id].writable && changes_nothing(Event::write);
  }
}

}  // namespace

Table Table::parse(const std::string& text, const std::string& origin, int limit) {
  Problems problems(origin);
  TableText parsed = read_table_text(text, problems);
  if (limit != 0 && parsed.limit_line != 0) {
    if (limit < 1 || limit > max_limit) {
      throw TableError(origin + ": limit " + std::to_string(limit) + " was asked for, expected 1 to " +
                       std::to_string(max_limit));
    }
    parsed.limit = limit;
  }
  check_table_text(parsed, problems);
  if (!problems.none()) throw TableError(problems.text());

  Table table;
  CompiledTable compiled = compile_table_text(parsed);
  table.name_ = std::move(parsed.name);
  table.family_ = parsed.family;
  table.limit_ = parsed.limit;
  table.states_ = std::move(compiled.states);
  table.rows_ = std::move(compiled.rows);
  mark_fast_hits(table.states_, table.rows_);
  return table;
}

Table Table::with_row(StateId state, Event event, bool shared, const Row& replacement) const {
  Table copy = *this;
  const std::size_t first = (std::size_t{state} * events + static_cast<std::size_t>(event)) * 2;
  Row& row = copy.rows_[first + (shared ? 1 : 0)];
  Row& partner = copy.rows_[first + (shared ? 0 : 1)];
  const bool one_row = same_effect(row, partner) && row.line == partner.line;
  row = replacement;
  if (one_row || !is_local(event) || !replacement.uses_bus) {
    partner = replacement;
  } else {
    partner.uses_bus = true;
    partner.bus = replacement.bus;
  }
  mark_fast_hits(copy.states_, copy.rows_);
  return copy;
}

bool Table::serves_io() const {
  for (std::size_t id = 0; id < states_.size(); ++id)
    for (const Event event : {Event::snoop_io_read, Event::snoop_io_write})
      if (row(static_cast<StateId>(id), event, false).defined) return true;
  return false;
}

std::string Table::dump() const {
  std::ostringstream out;
  out << "protocol " << name_ << ", family " << (family_ == Family::update ? "update" : "invalidate");
  if (counts()) out << ", limit " << limit_;
  out << '\n';
  for (const State& state : states_) {
    out << "state " << state.name;
    if (!state.readable) out << " absent";
    if (state.readable) out << " readable";
    if (state.writable) out << " writable";
    if (state.owner) out << " owner";
    if (state.fast_read) out << " fast-read";
    if (state.fast_write) out << " fast-write";
    out << '\n';
  }
  const auto write = [&](StateId id, Event event, const char* when, const Row& answer) {
    if (!answer.defined) return;
    out << states_[id].name << ' ' << name_of(event) << when << " | " << actions_of(answer) << " | "
        << states_[answer.next].name << '\n';
  };
  for (std::size_t id = 0; id < states_.size(); ++id) {
    for (int e = 0; e < events; ++e) {
      const StateId state = static_cast<StateId>(id);
      const Event event = static_cast<Event>(e);
      if (same_effect(row(state, event, false), row(state, event, true))) {
        write(state, event, "", row(state, event, false));
      } else {
        write(state, event, " shared", row(state, event, true));
        write(state, event, " alone", row(state, event, false));
      }
    }
  }
  return out.str();
}

}  // namespace earshot
