// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/prover.h"

#include <algorithm>
#include <cassert>
#include <deque>
#include <unordered_map>

#include "earshot/protocol/line_world.h"

namespace earshot {
namespace {

// A folded global state: the caches' states in ascending order, one a byte, and memory's freshness. Copies
// need no freshness here, because a world with a stale copy is a violation and is not explored further.
struct Folded {
  std::uint64_t states = 0;
  bool memory_fresh = true;
  bool operator==(const Folded& other) const {
    return states == other.states && memory_fresh == other.memory_fresh;
  }
};

struct FoldedHash {
  std::size_t operator()(const Folded& folded) const {
    std::uint64_t mixed = folded.states * 2 + (folded.memory_fresh ? 1 : 0);
    mixed = (mixed ^ (mixed >> 31)) * 0x9e3779b97f4a7c15u;
    return static_cast<std::size_t>(mixed ^ (mixed >> 29));
  }
};

Folded fold(const LineWorld& world) {
  std::array<StateId, max_proved_caches> states{};
  for (int c = 0; c < world.caches; ++c) {
    states[static_cast<std::size_t>(c)] = world.copies[static_cast<std::size_t>(c)].state;
  }
  std::sort(states.begin(), states.begin() + world.caches);
  Folded folded;
  for (int c = world.caches - 1; c >= 0; --c) {
    folded.states = folded.states << 8 | states[static_cast<std::size_t>(c)];
  }
  folded.memory_fresh = world.memory_fresh;
  return folded;
}

LineWorld unfold(const Folded& folded, int caches) {
  LineWorld world;
  world.caches = caches;
  world.memory_fresh = folded.memory_fresh;
  for (int c = 0; c < caches; ++c) {
    Copy& copy = world.copies[static_cast<std::size_t>(c)];
    copy.state = static_cast<StateId>(folded.states >> (8 * c));
    copy.fresh = copy.state != absent;
  }
  return world;
}

// In how many ways the caches can be dealt to the states of a folded world: n! over the factorials of how
// often each state occurs.
std::uint64_t permutations(const LineWorld& world) {
  std::uint64_t count = 1;
  int equal = 0;
  for (int c = 0; c < world.caches; ++c) {
    const auto at = static_cast<std::size_t>(c);
    equal = c > 0 && world.copies[at].state == world.copies[at - 1].state ? equal + 1 : 1;
    count = count * static_cast<std::uint64_t>(c + 1) / static_cast<std::uint64_t>(equal);
  }
  return count;
}

bool is_io(Event event) { return event == Event::snoop_io_read || event == Event::snoop_io_write; }

const char* verb(Event event) {
  const bool read = event == Event::read || event == Event::snoop_io_read;
  return read ? "reads" : event == Event::replace ? "replaces" : "writes";
}

// "A M -> Sm -> Sc"
std::string way(const Table& table, int cache, const std::vector<StateId>& visited) {
  std::string text = cache_name(cache);
  const char* separator = " ";
  for (const StateId state : visited) {
    text += separator + table.state(state).name;
    separator = " -> ";
  }
  return text;
}

// "2. cache B writes: bus update (shared); A Sm -> Sc, B Sc -> Sm; memory stale"
std::string tell(const Table& table, const LineWorld& after, int number, int cache, Event event,
                 const StepStory& story) {
  const std::string who = is_io(event) ? "the I/O port" : "cache " + cache_name(cache);
  std::string text = std::to_string(number) + ". " + who + " " + verb(event) + ": ";
  for (const std::string& transaction : story.transactions) {
    text += transaction + (&transaction == &story.transactions.back() ? "; " : ", ");
  }
  std::string moves, stale;
  for (int c = 0; c < after.caches; ++c) {
    const std::vector<StateId>& visited = story.visited[static_cast<std::size_t>(c)];
    const Copy& copy = after.copies[static_cast<std::size_t>(c)];
    if (visited.size() > 1) moves += (moves.empty() ? "" : ", ") + way(table, c, visited);
    if (copy.state != absent && !copy.fresh) stale += ", " + cache_name(c) + " stale";
  }
  return text + (moves.empty() ? "no state changes" : moves) + "; memory " +
         (after.memory_fresh ? "up to date" : "stale") + stale;
}

class Search {
 public:
  Search(const Table& table, int caches) : table_(table) {
    proof_.caches = caches;
    LineWorld start;
    start.caches = caches;
    reach(fold(start), Move{});
  }

  Proof run() {
    for (std::size_t next = 0; next < order_.size() && proof_.violation.empty(); ++next) visit(order_[next]);
    proof_.sound = proof_.violation.empty();
    return std::move(proof_);
  }

 private:
  // How a world was reached first. The acting cache is known by its state: caches in equal states are equal.
  struct Move {
    Folded from;
    StateId actor = absent;
    Event event = Event::read;
    bool first = true;
  };

  void reach(const Folded& folded, const Move& move) {
    if (reached_.emplace(folded, move).second) order_.push_back(folded);
  }

  // Tries every event in every cache, in a fixed order, so that the same counterexample is found every time.
  void visit(const Folded folded) {  // by value: reach() may move the list
    const LineWorld world = unfold(folded, proof_.caches);
    count(world);
    for (int c = 0; c < world.caches; ++c) {
      const StateId state = world.copies[static_cast<std::size_t>(c)].state;
      if (c > 0 && state == world.copies[static_cast<std::size_t>(c - 1)].state) continue;
      for (const Event event : {Event::read, Event::write, Event::replace}) {
        if (event == Event::replace && state == absent) continue;
        if (!explore(world, Move{folded, state, event, false}, c)) return;
      }
    }
    if (!table_.serves_io()) return;
    for (const Event event : {Event::snoop_io_read, Event::snoop_io_write})
      if (!explore(world, Move{folded, absent, event, false}, -1)) return;
  }

  // One event from one world. False: it breaks a rule.
  bool explore(const LineWorld& world, const Move& move, int actor) {
    LineWorld after = world;
    proof_.violation = act(after, move.event, actor, nullptr);
    if (!proof_.violation.empty()) {
      retell(move);
      return false;
    }
    reach(fold(after), move);
    return true;
  }

  std::string act(LineWorld& world, Event event, int actor, StepStory* story) const {
    return is_io(event) ? take_io_step(table_, world, event, story) : take_step(table_, world, actor, event, story);
  }

  void count(const LineWorld& world) {
    ++proof_.folded_states;
    proof_.unfolded_states += permutations(world);
    for (int a = 0; a < world.caches; ++a) {
      for (int b = 0; b < world.caches; ++b) {
        if (a == b) continue;
        proof_.coexisting.emplace(world.copies[static_cast<std::size_t>(a)].state,
                                  world.copies[static_cast<std::size_t>(b)].state);
      }
    }
  }

  // Plays the way to the violation again with caches that keep their names.
  void retell(const Move& last) {
    std::deque<Move> moves{last};
    for (Move back = reached_.at(last.from); !back.first; back = reached_.at(back.from)) {
      moves.push_front(back);
    }
    LineWorld world;
    world.caches = proof_.caches;
    for (const Move& move : moves) {
      int actor = is_io(move.event) ? -1 : 0;
      while (actor >= 0 && world.copies[static_cast<std::size_t>(actor)].state != move.actor) ++actor;
      StepStory story;
      proof_.violation = act(world, move.event, actor, &story);
      const int number = static_cast<int>(proof_.steps.size()) + 1;
      proof_.steps.push_back(tell(table_, world, number, actor, move.event, story));
    }
  }

  const Table& table_;
  Proof proof_;
  std::unordered_map<Folded, Move, FoldedHash> reached_;
  std::vector<Folded> order_;  // in order of their distance from the start
};

// "  may stand in two caches at once: I+I, I+E, ..." within 80 columns.
std::string describe_coexisting(const Table& table, const Proof& proof) {
  std::string text, line = "  may stand in two caches at once:";
  for (const auto& [a, b] : proof.coexisting) {
    if (b < a) continue;
    const std::string pair = " " + table.state(a).name + "+" + table.state(b).name;
    if (line.size() + pair.size() > 80) {
      text += line + "\n";
      line = "   ";
    }
    line += pair;
  }
  return text + line + "\n";
}

}  // namespace

Proof prove(const Table& table, int caches) {
  assert(caches >= 1 && caches <= max_proved_caches);
  return Search(table, caches).run();
}

std::string describe(const Table& table, const Proof& proof) {
  const std::string with =
      " with " + std::to_string(proof.caches) + (proof.caches == 1 ? " cache" : " caches");
  if (!proof.sound) {
    std::string text = table.name() + ": NOT sound" + with + ": " + proof.violation + "\n";
    for (const std::string& step : proof.steps) text += "  " + step + "\n";
    return text;
  }
  std::string text = table.name() + ": sound" + with + "\n  " + std::to_string(proof.folded_states) +
                     " reachable states, " + std::to_string(proof.unfolded_states) +
                     " if the caches are told apart\n";
  if (proof.caches > 1) text += describe_coexisting(table, proof);
  return text;
}

}  // namespace earshot
