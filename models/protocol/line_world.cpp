// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/line_world.h"

namespace earshot {
namespace {

class Step {
 public:
  Step(const Table& table, LineWorld& world, int cache, StepStory* story)
      : table_(table), world_(world), cache_(cache), story_(story) {}

  std::string run(Event event) {
    note_states();
    judge(event);
    if (wrong_.empty()) check_served(event);
    if (wrong_.empty()) check_rules();
    return wrong_;
  }

  std::string run_io(Event event) {
    note_states();
    const BusKind kind = event == Event::snoop_io_read ? BusKind::io_read : BusKind::io_write;
    const Answer answer = broadcast(kind);
    note_transaction(kind, answer);
    note_states();
    const bool fresh = answer.supplied ? answer.supplied_fresh : world_.memory_fresh;
    if (wrong_.empty() && kind == BusKind::io_read && !fresh) wrong_ = "the I/O port reads a stale value";
    if (wrong_.empty()) check_rules();
    return wrong_;
  }

 private:
  // What the other caches answered to one transaction.
  struct Answer {
    bool shared = false;
    bool supplied = false;
    bool memory_written = false;
    bool supplied_fresh = true;  // all suppliers together: which of them the bus listens to must not matter
    std::string suppliers;
    std::string speechless;  // a cache without a row: the transaction cannot complete
  };

  // A write may be judged again, but in a table that makes sense not twice in one state.
  void judge(Event event) {
    for (std::size_t rounds = 0; rounds <= table_.states().size(); ++rounds) {
      if (!act(event)) return;
    }
    wrong_ = name() + "'s " + name_of(event) + " is judged again without end";
  }

  // Follows one row. True if the event must be judged again.
  bool act(Event event) {
    const Row& issued = table_.row(own().state, event, false);
    if (!issued.defined) return missing(cache_, event);
    Answer answer;
    if (issued.uses_bus) {
      if (issued.bus == BusKind::write_back) {
        world_.memory_fresh = own().fresh;
      } else {
        answer = broadcast(issued.bus);
      }
      note_transaction(issued.bus, answer);
      if (!wrong_.empty()) return false;
    }
    const Row& row = table_.row(own().state, event, answer.shared);
    if (!row.defined) return missing(cache_, event);
    if (row.uses_bus && is_fetch(row.bus)) {
      own().fresh = answer.supplied ? answer.supplied_fresh : world_.memory_fresh;
    }
    if (event == Event::write && !row.again) write(row);
    move(own(), row.next);
    note_states();
    return row.again;
  }

  static bool is_fetch(BusKind kind) { return kind == BusKind::read || kind == BusKind::read_exclusive; }
  static bool carries_word(BusKind kind) {
    return kind == BusKind::update || kind == BusKind::write_through || kind == BusKind::io_write;
  }

  // Every other cache that holds the line sees the transaction.
  Answer broadcast(BusKind kind) {
    Answer answer;
    for (int other = 0; other < world_.caches; ++other) {
      Copy& copy = world_.copies[static_cast<std::size_t>(other)];
      if (other == cache_ || copy.state == absent) continue;
      const Row& row = table_.row(copy.state, snoop_event(kind), false);
      if (!row.defined) {
        missing(other, snoop_event(kind));
        answer.speechless = cache_name(other);
        return answer;
      }
      if (row.supply) {
        answer.supplied = true;
        answer.supplied_fresh &= copy.fresh;
        answer.suppliers += (answer.suppliers.empty() ? "" : "+") + cache_name(other);
        answer.memory_written |= row.write_memory;
      }
      // The word itself comes with write(); a copy that does not take it is stale from now on.
      if (carries_word(kind)) copy.fresh &= row.take;
      move(copy, row.next);
      answer.shared |= copy.state != absent;
    }
    if (answer.memory_written) world_.memory_fresh = answer.supplied_fresh;
    return answer;
  }

  // The new value exists from here on. Copies that a broadcast reached were judged in broadcast().
  void write(const Row& row) {
    const bool told = row.uses_bus && carries_word(row.bus);
    if (!told) {
      for (int other = 0; other < world_.caches; ++other) {
        if (other != cache_) world_.copies[static_cast<std::size_t>(other)].fresh = false;
      }
    }
    if (!(told && row.bus == BusKind::write_through)) world_.memory_fresh = false;
  }

  static void move(Copy& copy, StateId next) {
    copy.state = next;
    if (next == absent) copy.fresh = false;
  }

  void check_served(Event event) {
    const bool held = own().state != absent;
    if (event == Event::read && !held) {
      wrong_ = name() + "'s read ends without a copy, in " + state_name(own().state);
    }
    if (event == Event::replace && held) {
      wrong_ = name() + "'s replace keeps the copy, in " + state_name(own().state);
    }
  }

  // The rules in the order of prover.h; the rule about missing rows is kept by act() and broadcast().
  void check_rules() {
    int owner = -1;
    for (int c = 0; c < world_.caches; ++c) {
      const State& state = table_.state(state_of(c));
      if (state.owner && owner >= 0) {
        wrong_ = "two owners: " + holder(owner) + " and " + holder(c);
        return;
      }
      if (state.owner) owner = c;
    }
    for (int c = 0; c < world_.caches; ++c) {
      if (!table_.state(state_of(c)).writable) continue;
      for (int other = 0; other < world_.caches; ++other) {
        if (other == c || state_of(other) == absent) continue;
        wrong_ = holder(c) + " may write without the bus, but " + holder(other) + " also has a copy";
        return;
      }
    }
    for (int c = 0; c < world_.caches; ++c) {
      if (table_.state(state_of(c)).readable && !world_.copies[static_cast<std::size_t>(c)].fresh) {
        wrong_ = holder(c) + " can read a stale value";
        return;
      }
    }
    if (owner < 0 && !world_.memory_fresh) wrong_ = "nobody owns the line, but memory is stale";
  }

  // Always false, so that callers can stop with it.
  bool missing(int cache, Event event) {
    wrong_ = "no row says what " + holder(cache) + " does on " + name_of(event);
    return false;
  }

  void note_states() {
    if (story_ == nullptr) return;
    for (int c = 0; c < world_.caches; ++c) {
      std::vector<StateId>& visited = story_->visited[static_cast<std::size_t>(c)];
      if (visited.empty() || visited.back() != state_of(c)) visited.push_back(state_of(c));
    }
  }

  void note_transaction(BusKind kind, const Answer& answer) {
    if (story_ == nullptr) return;
    std::string text = std::string("bus ") + name_of(kind);
    if (!answer.speechless.empty()) {
      text += " (" + answer.speechless + " has no row)";
    } else if (kind != BusKind::write_back) {
      text += answer.suppliers.empty() ? " (" : " (" + answer.suppliers + " supplies, ";
      text += answer.memory_written ? "memory takes it, " : "";
      text += answer.shared ? "shared)" : "alone)";
    }
    story_->transactions.push_back(text);
  }

  Copy& own() { return world_.copies[static_cast<std::size_t>(cache_)]; }
  StateId state_of(int cache) const { return world_.copies[static_cast<std::size_t>(cache)].state; }
  const std::string& state_name(StateId state) const { return table_.state(state).name; }
  std::string name() const { return "cache " + cache_name(cache_); }
  // "cache A in Sc"
  std::string holder(int cache) const {
    return "cache " + cache_name(cache) + " in " + state_name(state_of(cache));
  }

  const Table& table_;
  LineWorld& world_;
  const int cache_;
  StepStory* story_;
  std::string wrong_;
};

}  // namespace

std::string cache_name(int cache) {
  return std::string(1, static_cast<char>('A' + cache));
}

std::string take_io_step(const Table& table, LineWorld& world, Event event, StepStory* story) {
  return Step(table, world, -1, story).run_io(event);
}

std::string take_step(const Table& table, LineWorld& world, int cache, Event event, StepStory* story) {
  return Step(table, world, cache, story).run(event);
}

}  // namespace earshot
