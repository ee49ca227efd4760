// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// transport_dbg in arbitrated timing, at every stage of every kind of transaction: it reads the coherent
// value, and what it writes stays written.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

// What happens to a fresh line: prepared in peace, then done under observation. Word 0 is 1 before and, if
// the transaction writes, 2 afterwards.
struct Scenario {
  const char* name;
  std::function<void(Bench&, std::uint64_t)> prepare, act;
  bool writes;
};

constexpr std::uint64_t aside = 0x8000;  // lines of the same set, to push a victim out

void push_out(Bench& bench, int who, std::uint64_t line) {
  bench.cpu(who).read(line + aside);
  bench.cpu(who).read(line + 2 * aside);
}

const std::vector<Scenario>& scenarios() {
  static const std::vector<Scenario> all{
      {"a read from memory", [](Bench& bench, std::uint64_t line) { bench.memory.poke(line, 1); },
       [](Bench& bench, std::uint64_t line) { CHECK(bench.cpu(0).read(line) == 1); }, false},
      {"a read from an owner", [](Bench& bench, std::uint64_t line) { bench.cpu(1).write(line, 1); },
       [](Bench& bench, std::uint64_t line) { CHECK(bench.cpu(0).read(line) == 1); }, false},
      {"a write miss to memory", [](Bench& bench, std::uint64_t line) { bench.memory.poke(line, 1); },
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 2); }, true},
      {"a write miss to an owner", [](Bench& bench, std::uint64_t line) { bench.cpu(1).write(line, 1); },
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 2); }, true},
      {"a write to a shared line",
       [](Bench& bench, std::uint64_t line) {
         bench.memory.poke(line, 1);
         for (int i = 0; i < 3; ++i) bench.cpu(i).read(line);
       },
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 2); }, true},
      {"a write to a line that another owns and all share",
       [](Bench& bench, std::uint64_t line) {
         bench.cpu(1).write(line, 1);
         for (int i = 0; i < 3; ++i) bench.cpu(i).read(line);
       },
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 2); }, true},
      {"a write-back", [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 1); },
       [](Bench& bench, std::uint64_t line) { push_out(bench, 0, line); }, false},
      {"a write-back while another reads",
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 1); },
       [](Bench& bench, std::uint64_t line) {
         at_once({[&] { push_out(bench, 0, line); }, [&] { CHECK(bench.cpu(1).read(line) == 1); }});
       },
       false},
      {"a write-back while another writes",
       [](Bench& bench, std::uint64_t line) { bench.cpu(0).write(line, 1); },
       [](Bench& bench, std::uint64_t line) {
         at_once({[&] { push_out(bench, 0, line); }, [&] { bench.cpu(1).write(line, 2); }});
       },
       true},
  };
  return all;
}

std::vector<std::unique_ptr<BoxedBench>> benches(BusStructure structure) {
  std::vector<std::unique_ptr<BoxedBench>> boxes;
  for (const std::string& protocol : builtin_tables()) {
    BenchOptions options;
    options.caches = 4;
    options.bus.structure = structure;
    boxes.push_back(std::make_unique<BoxedBench>(protocol.c_str(), load_table(protocol), options));
  }
  return boxes;
}

// Memory answers early: it has the bytes long before the bus says so.
void check_reads(BusStructure structure) {
  const auto boxes = benches(structure);
  simulate([&] {
    std::uint64_t line = 0;
    for (const Scenario& scenario : scenarios()) {
      line += 32;
      for (const auto& box : boxes) {
        Bench& bench = box->bench;
        INFO(box->name() << ": " << scenario.name);
        scenario.prepare(bench, line);
        settle();
        bool done = false;
        std::string seen;
        at_once({[&] {
                   scenario.act(bench, line);
                   done = true;
                 },
                 [&] {
                   for (unsigned n = 0; n < 500 && (!done || n < 300); ++n) {
                     const std::string value = std::to_string(bench.cpu(3).debug_read(line));
                     if (seen.empty() || seen.substr(seen.size() - 1) != value) seen += value;
                     sc_core::wait(ns(1));
                   }
                 }});
        CHECK(seen == (scenario.writes ? "12" : "1"));
        CHECK(bench.cpu(2).read(line) == (scenario.writes ? 2 : 1));
        settle();
        CHECK(bench.bus->waiting() == "");
      }
    }
  });
}

// Writes word 1 of the line at every moment of the scenario in turn.
void check_writes(BusStructure structure) {
  const auto boxes = benches(structure);
  simulate([&] {
    std::uint64_t line = 0;
    std::uint32_t value = 100;
    for (const Scenario& scenario : scenarios())
      for (const auto& box : boxes)
        for (unsigned after = 0; after < 230; after += 7) {
          Bench& bench = box->bench;
          line = (line + 32) % aside;
          ++value;
          INFO(box->name() << ": " << scenario.name << ", debug write after " << after << " ns");
          if (bench.flush() != 0) FAIL("refused");
          bench.memory.poke(line, 0);
          bench.memory.poke(line + 4, 0);
          scenario.prepare(bench, line);
          settle();
          at_once({[&] { scenario.act(bench, line); },
                   [&] {
                     sc_core::wait(ns(after));
                     bench.cpu(3).debug_write(line + 4, value);
                     CHECK(bench.cpu(3).debug_read(line + 4) == value);
                   }});
          settle();
          for (int i = 0; i < 4; ++i) {
            CHECK(bench.cpu(i).debug_read(line + 4) == value);
            CHECK(bench.cpu(i).read(line + 4) == value);
            CHECK(bench.cpu(i).read(line) == (scenario.writes ? 2 : 1));
          }
          if (bench.flush() != 0) FAIL("refused");
          CHECK(bench.memory.word(line + 4) == value);
        }
  });
}

}  // namespace

TEST_CASE("split: a debug read sees the coherent value at every moment of every transaction", "[cache]") {
  check_reads(BusStructure::split);
}
TEST_CASE("connected: a debug read sees the coherent value at every moment of every transaction", "[cache]") {
  check_reads(BusStructure::connected);
}
TEST_CASE("split: a debug write at any moment of any transaction stays written", "[cache]") {
  check_writes(BusStructure::split);
}
TEST_CASE("connected: a debug write at any moment of any transaction stays written", "[cache]") {
  check_writes(BusStructure::connected);
}

TEST_CASE("a debug write stays written while memory has not yet read or written the line", "[cache]") {
  std::vector<std::unique_ptr<BoxedBench>> boxes;
  for (const std::string& protocol : builtin_tables())
    boxes.push_back(std::make_unique<BoxedBench>(protocol.c_str(), load_table(protocol), BenchOptions{4}));
  simulate([&] {
    std::uint64_t line = 0;
    for (const Scenario& scenario : scenarios())
      for (const auto& box : boxes) {
        Bench& bench = box->bench;
        line += 32;
        INFO(box->name() << ": " << scenario.name);
        scenario.prepare(bench, line);
        settle();
        // Memory keeps every request for 100 ns before it looks at any byte; a debug write comes half way.
        bench.memory.hold = true;
        bool done = false;
        std::uint32_t value = 0;
        at_once({[&] {
                   scenario.act(bench, line);
                   done = true;
                 },
                 [&] {
                   for (unsigned n = 0; !done || n < 12; ++n) {
                     sc_core::wait(ns(50));
                     bench.cpu(3).debug_write(line + 4, ++value);
                     CHECK(bench.cpu(3).debug_read(line + 4) == value);
                     sc_core::wait(ns(50));
                     CHECK(bench.cpu(3).debug_read(line + 4) == value);
                     while (!bench.memory.held.empty()) bench.memory.respond();
                     CHECK(bench.cpu(3).debug_read(line + 4) == value);
                     REQUIRE(n < 100);
                   }
                 }});
        bench.memory.hold = false;
        settle();
        for (int i = 0; i < 4; ++i) CHECK(bench.cpu(i).read(line + 4) == value);
        CHECK(bench.flush() == 0);
        CHECK(bench.memory.word(line + 4) == value);
      }
  });
}
