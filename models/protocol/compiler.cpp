// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// From rows as written to one dense array. Three things happen here and nowhere else: rows that go without
// saying are filled in, a state that counts becomes `limit` states, and conditions on the count are decided.
#include "earshot/protocol/table_text.h"

namespace earshot {
namespace {

class Compiler {
 public:
  explicit Compiler(const TableText& table) : table_(table) {}

  CompiledTable compile() {
    number_states();
    compiled_.rows.assign(compiled_.states.size() * static_cast<std::size_t>(events) * 2, Row{});
    for (std::size_t id = 0; id < compiled_.states.size(); ++id) fill_defaults(id);
    for (const RowText& row : table_.rows) place(row);
    return std::move(compiled_);
  }

 private:
  // Where a compiled state comes from.
  struct Origin {
    std::size_t state;
    int count;
  };

  // The absent state is number 0; the others follow in the order of their declaration.
  void number_states() {
    first_id_.resize(table_.states.size());
    for (const bool absent_turn : {true, false}) {
      for (std::size_t i = 0; i < table_.states.size(); ++i) {
        const StateText& state = table_.states[i];
        if (state.absent != absent_turn) continue;
        first_id_[i] = compiled_.states.size();
        for (int count = 0; count < copies(state); ++count) {
          State compiled;
          compiled.name = state.name + (state.counts ? "/" + std::to_string(count) : "");
          compiled.readable = state.readable;
          compiled.writable = state.writable;
          compiled.owner = state.owner;
          compiled_.states.push_back(compiled);
          origins_.push_back({i, count});
        }
      }
    }
  }

  int copies(const StateText& state) const { return state.counts ? table_.limit : 1; }

  // A hit changes nothing but the count, and a copy that memory or an owner backs may silently go.
  void fill_defaults(std::size_t id) {
    const State& state = compiled_.states[id];
    Row hit;
    hit.defined = true;
    hit.next = static_cast<StateId>(first_id_[origins_[id].state]);
    if (state.readable) set(id, Event::read, hit);
    if (state.writable) set(id, Event::write, hit);
    Row dropped;
    dropped.defined = true;
    dropped.next = absent;
    if (state.readable && !state.owner) set(id, Event::replace, dropped);
  }

  void place(const RowText& text) {
    const std::size_t written = static_cast<std::size_t>(text.state);
    const std::size_t first = first_id_[written];
    for (int count = 0; count < copies(table_.states[written]); ++count) {
      const bool reaches_limit = count + 1 >= table_.limit;
      if (text.when == When::below && reaches_limit) continue;
      if (text.when == When::at_limit && !reaches_limit) continue;
      const std::size_t id = first + static_cast<std::size_t>(count);
      const Row row = compile_row(text, count);
      if (text.when == When::shared || text.when == When::alone) {
        slot(id, text.event, text.when == When::shared) = row;
      } else {
        set(id, text.event, row);
      }
    }
  }

  // The row as it reads in a copy that has counted `count` updates.
  Row compile_row(const RowText& text, int count) const {
    const bool keeps_count = !is_local(text.event) && text.next == text.state;
    const std::size_t next = first_id_[static_cast<std::size_t>(text.next)];
    const int next_count = text.count ? count + 1 : keeps_count ? count : 0;
    Row row;
    row.defined = true;
    row.next = static_cast<StateId>(next + static_cast<std::size_t>(next_count));
    row.uses_bus = text.uses_bus;
    row.bus = text.bus;
    row.again = text.again;
    row.supply = text.supply;
    row.write_memory = text.write_memory;
    row.take = text.take;
    row.line = text.line;
    return row;
  }

  Row& slot(std::size_t id, Event event, bool shared) {
    return compiled_.rows[(id * events + static_cast<std::size_t>(event)) * 2 + (shared ? 1 : 0)];
  }

  void set(std::size_t id, Event event, const Row& row) {
    slot(id, event, false) = row;
    slot(id, event, true) = row;
  }

  const TableText& table_;
  CompiledTable compiled_;
  std::vector<std::size_t> first_id_;  // by written state: its first compiled state
  std::vector<Origin> origins_;        // by compiled state
};

}  // namespace

int compiled_state_count(const TableText& table) {
  int states = 0;
  for (const StateText& state : table.states) states += state.counts ? table.limit : 1;
  return states;
}

CompiledTable compile_table_text(const TableText& table) {
  return Compiler(table).compile();
}

}  // namespace earshot
