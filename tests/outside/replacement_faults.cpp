// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Published counts of faults for reference strings of pages, with a cache of one set: a frame is a way, a
// page a line. Twice: through the LineStore alone, and through a whole cache on a bus, where a fault is a
// block fetched.
//
// - L. A. Belady, R. A. Nelson, G. S. Shedler, "An Anomaly in Space-Time Characteristics of Certain Programs
// Running
//   in a Paging Machine", Communications of the ACM 12(6), 1969: the string 1 2 3 4 1 2 5 1 2 3 4 5, with
//   FIFO 9 faults in 3 frames and 10 in 4. The other counts for it are derived by hand.
// - A. Silberschatz, P. B. Galvin, G. Gagne, "Operating System Concepts", chapter on virtual memory: the
// string
//   7 0 1 2 0 3 0 4 2 3 0 3 2 1 2 0 1 7 0 1, in 3 frames FIFO 15 faults, LRU 12, optimal 9. The others are
//   derived.
// - Tree-PLRU with four ways: Intel, "Embedded Pentium Processor Family Developer's Manual", 1998 (three bits
// a set;
//   the table of victims and next states below). The counts for the strings are derived.
#include <catch2/catch.hpp>
#include <string>
#include <vector>

#include "earshot/cache/line_store.h"
#include "played_system.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr unsigned line_bytes = 32;
using Pages = std::vector<std::uint64_t>;

const Pages belady = {1, 2, 3, 4, 1, 2, 5, 1, 2, 3, 4, 5};
const Pages silberschatz = {7, 0, 1, 2, 0, 3, 0, 4, 2, 3, 0, 3, 2, 1, 2, 0, 1, 7, 0, 1};

Pages repeated(const Pages& pages, int times) {
  Pages all;
  for (; times > 0; --times) all.insert(all.end(), pages.begin(), pages.end());
  return all;
}

Geometry one_set(Replacement policy, unsigned ways, std::uint64_t seed = 1) {
  return {std::uint64_t{ways} * line_bytes, ways, line_bytes, policy, seed};
}

// Touches or fills a page; true if it was there.
bool use(LineStore& store, std::uint64_t page) {
  if (Slot* slot = store.find(page * line_bytes); slot != nullptr) {
    store.touch(*slot);
    return true;
  }
  Slot& slot = *store.victim(page * line_bytes);
  store.clear(slot);
  slot.state = 1;
  store.fill(slot, page * line_bytes);
  return false;
}

// "MMMH": what each reference found.
std::string trace(const Pages& pages, const Geometry& geometry) {
  LineStore store(geometry);
  std::string found;
  for (const std::uint64_t page : pages) found += use(store, page) ? 'H' : 'M';
  return found;
}

std::uint64_t faults(const Pages& pages, Replacement policy, unsigned frames, std::uint64_t seed = 1) {
  const std::string found = trace(pages, one_set(policy, frames, seed));
  return static_cast<std::uint64_t>(std::count(found.begin(), found.end(), 'M'));
}

// Counts for 1, 2, 3 ... frames.
struct Published {
  const char* what;
  const Pages& pages;
  Replacement policy;
  std::vector<std::uint64_t> faults;
};

// clang-format off
const std::vector<Published> published = {
    {"Belady, FIFO",       belady,       Replacement::fifo, {12, 12,  9, 10, 5, 5, 5}},
    {"Belady, LRU",        belady,       Replacement::lru,  {12, 12, 10,  8, 5, 5, 5}},
    {"Silberschatz, FIFO", silberschatz, Replacement::fifo, {20, 15, 15, 10, 9, 6, 6}},
    {"Silberschatz, LRU",  silberschatz, Replacement::lru,  {20, 17, 12,  8, 7, 6, 6}},
};
// The least possible, by Belady's rule of the farthest next use (IBM Systems Journal 5(2), 1966).
const std::vector<std::uint64_t> least_belady =       {12,  9, 7, 6, 5, 5, 5};
const std::vector<std::uint64_t> least_silberschatz = {20, 13, 9, 8, 7, 6, 6};
// clang-format on

// ---- Tree-PLRU: the bits that its victims betray

// The three bits "b0 b1 b2" of the only set, 1 where the left side was used more recently. REQUIRES: `store`
// holds page i in way i.
std::string tree_bits(const LineStore& store) {
  const auto victim_after = [&](std::vector<std::uint64_t> touched) {
    LineStore copy = store;
    for (const std::uint64_t page : touched) use(copy, page);
    return copy.victim(99 * line_bytes)->line / line_bytes;
  };
  const bool b0 = victim_after({}) >= 2;
  const bool b1 = victim_after({2}) == 1;  // a use on the right sends the victim to the left, which tells b1
  const bool b2 = victim_after({0}) == 3;
  return std::string() + (b0 ? '1' : '0') + (b1 ? '1' : '0') + (b2 ? '1' : '0');
}

LineStore four_ways(const Pages& touched = {}) {
  LineStore store(one_set(Replacement::tree_plru, 4));
  for (std::uint64_t page = 0; page < 4; ++page) use(store, page);
  for (const std::uint64_t page : touched) use(store, page);
  return store;
}

}  // namespace

TEST_CASE("FIFO and LRU fault as often as published in 1 to 7 frames", "[outside][cache]") {
  for (const Published& row : published) {
    for (unsigned frames = 1; frames <= row.faults.size(); ++frames) {
      INFO(row.what << ", " << frames << " frames");
      CHECK(faults(row.pages, row.policy, frames) == row.faults[frames - 1]);
    }
  }
}

TEST_CASE("FIFO's hits and misses on Belady's string fall where they are published", "[outside][cache]") {
  CHECK(trace(belady, one_set(Replacement::fifo, 3)) == "MMMMMMMHHMMH");
  CHECK(trace(belady, one_set(Replacement::fifo, 4)) == "MMMMHHMMMMMM");
}

// A common second example of the anomaly, from the same family of strings.
TEST_CASE("FIFO shows the anomaly on 3 2 1 0 3 2 4 3 2 1 0 4 too", "[outside][cache]") {
  const Pages pages = {3, 2, 1, 0, 3, 2, 4, 3, 2, 1, 0, 4};
  CHECK(faults(pages, Replacement::fifo, 3) == 9);
  CHECK(faults(pages, Replacement::fifo, 4) == 10);
}

// A repeatable anomaly, common textbook string 5678012301401234; counts derived: 13 and 14 a round.
TEST_CASE("FIFO with 4 frames faults once a round more than with 3 on the repeatable string",
          "[outside][cache]") {
  const Pages pages = {5, 6, 7, 8, 0, 1, 2, 3, 0, 1, 4, 0, 1, 2, 3, 4};
  for (int rounds = 1; rounds <= 10; ++rounds) {
    INFO(rounds << " rounds");
    CHECK(faults(repeated(pages, rounds), Replacement::fifo, 3) == 13u * static_cast<unsigned>(rounds));
    CHECK(faults(repeated(pages, rounds), Replacement::fifo, 4) == 14u * static_cast<unsigned>(rounds));
  }
}

// Derived: each page is used last exactly when it is the next to be replaced.
TEST_CASE("a cyclic sweep of one page too many misses every time with LRU and FIFO", "[outside][cache]") {
  const Pages sweeps = repeated({0, 1, 2, 3, 4}, 20);
  CHECK(faults(sweeps, Replacement::lru, 4) == 100);
  CHECK(faults(sweeps, Replacement::fifo, 4) == 100);
  CHECK(faults(sweeps, Replacement::tree_plru, 4) == 99);
}

TEST_CASE("no policy faults less often than the optimum", "[outside][cache]") {
  for (unsigned frames = 1; frames <= 7; ++frames) {
    for (const Replacement policy :
         {Replacement::lru, Replacement::fifo, Replacement::random, Replacement::tree_plru}) {
      if (policy == Replacement::tree_plru && (frames & (frames - 1)) != 0) continue;
      for (std::uint64_t seed = 1; seed <= (policy == Replacement::random ? 50u : 1u); ++seed) {
        INFO(name_of(policy) << ", " << frames << " frames, seed " << seed);
        CHECK(faults(belady, policy, frames, seed) >= least_belady[frames - 1]);
        CHECK(faults(silberschatz, policy, frames, seed) >= least_silberschatz[frames - 1]);
      }
    }
  }
}

TEST_CASE("tree-PLRU chooses the published victim and moves to the published state", "[outside][cache]") {
  // The eight states, each by touches after the fill that leaves state 000.
  const std::vector<std::pair<std::string, Pages>> states = {
      {"000", {}},     {"100", {1}},    {"110", {0}},    {"001", {2}},
      {"010", {0, 3}}, {"011", {0, 2}}, {"101", {2, 1}}, {"111", {2, 0}}};
  for (const auto& [bits, touches] : states) {
    INFO("state " << bits);
    const LineStore store = four_ways(touches);
    REQUIRE(tree_bits(store) == bits);

    // Victim: 00x line 0, 01x line 1, 1x0 line 2, 1x1 line 3.
    const std::uint64_t victim = bits[0] == '0' ? (bits[1] == '0' ? 0u : 1u) : (bits[2] == '0' ? 2u : 3u);
    LineStore asked = store;
    CHECK(asked.victim(99 * line_bytes)->line / line_bytes == victim);

    // Next state by the line used: 0: 11_, 1: 10_, 2: 0_1, 3: 0_0.
    const std::vector<std::string> next = {std::string("11") + bits[2], std::string("10") + bits[2],
                                           std::string("0") + bits[1] + "1",
                                           std::string("0") + bits[1] + "0"};
    for (std::uint64_t page = 0; page < 4; ++page) {
      LineStore used = store;
      use(used, page);
      CHECK(tree_bits(used) == next[page]);
    }
  }
}

// Derived from the table of the case above, starting in state 000.
TEST_CASE("tree-PLRU and true LRU part where the tree forgets the order", "[outside][cache]") {
  struct Touches {
    Pages pages;
    const char* bits;
    std::uint64_t plru_victim, lru_victim;
  };
  // clang-format off
  const std::vector<Touches> cases = {
      {{0, 1, 2, 3},       "000", 0, 0},
      {{0, 2, 1, 3},       "000", 0, 0},
      {{2, 0, 1, 3},       "000", 0, 2},
      {{0, 1, 2, 3, 0},    "110", 2, 1},
      {{0, 1, 2, 3, 0, 2}, "011", 1, 1},
      {{0, 1, 2, 3, 1},    "100", 2, 0},
      {{0, 1, 2, 3, 0, 1}, "100", 2, 2},
      {{3, 2, 1, 0},       "111", 3, 3},
  };
  // clang-format on
  for (const Touches& each : cases) {
    std::string touches;
    for (const std::uint64_t page : each.pages) touches += std::to_string(page);
    INFO("touches " << touches);
    LineStore tree = four_ways(each.pages);
    CHECK(tree_bits(tree) == each.bits);
    CHECK(tree.victim(99 * line_bytes)->line == each.plru_victim * line_bytes);
    LineStore lru(one_set(Replacement::lru, 4));
    for (std::uint64_t page = 0; page < 4; ++page) use(lru, page);
    for (const std::uint64_t page : each.pages) use(lru, page);
    CHECK(lru.victim(99 * line_bytes)->line == each.lru_victim * line_bytes);
  }
}

TEST_CASE("tree-PLRU with four ways misses 7 times on Belady's string and 9 on Silberschatz's",
          "[outside][cache]") {
  CHECK(faults(belady, Replacement::tree_plru, 4) == 7);
  CHECK(faults(silberschatz, Replacement::tree_plru, 4) == 9);
}

TEST_CASE("a whole cache fetches a block for each published fault, whether it reads or writes",
          "[outside][cache]") {
  struct Run {
    std::string what;
    const Pages& pages;
    std::uint64_t faults;
    std::unique_ptr<PlayedSystem> system;
  };
  const Table mesi = load_table("mesi");
  std::vector<Run> runs;
  const auto add = [&](const std::string& what, const Pages& pages, Replacement policy, unsigned frames,
                       std::uint64_t count) {
    const std::string prefix = "run" + std::to_string(runs.size()) + "_";
    runs.push_back({what + ", " + std::to_string(frames) + " frames", pages, count,
                    std::make_unique<PlayedSystem>(prefix, mesi, 1, one_set(policy, frames))});
  };
  for (const Published& row : published) {
    for (unsigned frames = 1; frames <= row.faults.size(); ++frames)
      add(row.what, row.pages, row.policy, frames, row.faults[frames - 1]);
  }
  add("Belady, tree-PLRU", belady, Replacement::tree_plru, 4, 7);
  add("Silberschatz, tree-PLRU", silberschatz, Replacement::tree_plru, 4, 9);
  const Pages sweeps = repeated({0, 1, 2, 3, 4}, 20);
  add("sweep, LRU", sweeps, Replacement::lru, 4, 100);
  add("sweep, FIFO", sweeps, Replacement::fifo, 4, 100);

  simulate([&] {
    for (Run& run : runs) {
      INFO(run.what);
      for (std::size_t i = 0; i < run.pages.size(); ++i) {
        if (i % 3 == 0)
          run.system->write(0, run.pages[i] * line_bytes, static_cast<std::uint32_t>(i));
        else
          run.system->read(0, run.pages[i] * line_bytes);
      }
      CHECK(run.system->count(BusKind::read) + run.system->count(BusKind::read_exclusive) == run.faults);
      CHECK(run.system->bus->totals().block_reads == run.faults);
      run.system->monitor->check_memory();
    }
  });
}
