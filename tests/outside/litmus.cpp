// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The litmus tests of litmus_tests.h on real caches: each thread a simulation process of its own, thinking
// for random times between accesses, over many seeded rounds. Sequential consistency: no forbidden outcome,
// and none that is not an interleaving of the threads. The caches hold one or two lines, so that lines come
// and go all the time; x, y and z stand in one line or in three. Everything is observed by the coherence
// monitor as well.
#include <algorithm>
#include <catch2/catch.hpp>
#include <map>
#include <random>

#include "litmus_tests.h"
#include "played_system.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr unsigned line_bytes = 32;
constexpr int caches = 4;
constexpr std::uint32_t seed = 1979;

struct Findings {
  std::uint64_t rounds = 0;
  std::uint64_t not_sequential = 0;
  std::string first;                              // of those: which test, where, what
  std::map<std::string, std::set<Outcome>> seen;  // by test
};

// One system and its four thread processes, which play whatever round is announced.
class Machine {
 public:
  Machine(const std::string& prefix, const Table& table, unsigned lines, MemoryTime memory_time)
      : system(prefix, table, caches,
               {std::uint64_t{lines} * line_bytes, lines, line_bytes, Replacement::lru, 1}, {}, memory_time) {
    for (int i = 0; i < caches; ++i)
      sc_core::sc_spawn([this, i] { thread(i); }, (prefix + "thread" + std::to_string(i)).c_str());
  }

  // Plays `rounds` rounds of a test. From a simulation process.
  void play(const LitmusTest& test, bool one_line, int rounds, Findings& findings) {
    const std::set<Outcome> allowed = test.sequentially_consistent();
    for (int round = 0; round < rounds; ++round) {
      const Outcome outcome = play_once(test, one_line);
      ++findings.rounds;
      findings.seen[test.name()].insert(outcome);
      if (!test.forbids(outcome) && allowed.count(outcome) == 1) continue;
      if (findings.not_sequential++ > 0) continue;
      findings.first = std::string(system.bus->name()) + ", test " + test.name() + ", round " +
                       std::to_string(round) + ", " + (one_line ? "one line" : "three lines") + ": outcome";
      for (const int value : outcome) findings.first += " " + std::to_string(value);
    }
  }

  PlayedSystem system;

 private:
  Outcome play_once(const LitmusTest& test, bool one_line) {
    test_ = &test;
    one_line_ = one_line;
    base_ = (random_() % 8) * 4 * line_bytes;
    registers_.assign(test.registers(), -1);
    cpus_ = {0, 1, 2, 3};
    for (std::size_t i = cpus_.size() - 1; i > 0; --i) std::swap(cpus_[i], cpus_[random_() % (i + 1)]);

    // The start values, each written by anybody, and some copies here and there.
    sc_core::sc_time delay;
    for (std::size_t place = 0; place < places; ++place)
      system.perform(any_cache(), true, address_of(place), static_cast<std::uint32_t>(test.start()[place]),
                     delay);
    for (std::uint64_t copies = random_() % 8; copies > 0; --copies)
      system.perform(any_cache(), false, address_of(random_() % places), 0, delay);
    sc_core::wait(delay);

    running_ = static_cast<int>(test.threads().size());
    start_.notify(sc_core::SC_ZERO_TIME);
    sc_core::wait(end_);
    if (error_) std::rethrow_exception(error_);
    Memory memory;
    for (std::size_t place = 0; place < places; ++place)
      memory[place] = static_cast<int>(system.read(any_cache(), address_of(place)));
    return test.outcome(registers_, memory);
  }

  void thread(int number) {
    const auto index = static_cast<std::size_t>(number);
    for (;;) {
      sc_core::wait(start_);
      if (index >= test_->threads().size()) continue;
      try {
        play_thread(test_->threads()[index], cpus_[index]);
      } catch (...) {
        error_ = std::current_exception();
      }
      if (--running_ == 0) end_.notify(sc_core::SC_ZERO_TIME);
    }
  }

  // With a global quantum of 0 other threads may run after every step; else the thread runs ahead of time.
  void play_thread(const std::vector<LitmusTest::Step>& steps, int cpu) {
    tlm_utils::tlm_quantumkeeper keeper;
    keeper.reset();
    const auto pass = [&](sc_core::sc_time delay) {
      keeper.set(delay);
      if (keeper.need_sync()) keeper.sync();
    };
    for (const LitmusTest::Step& step : steps) {
      pass(keeper.get_local_time() + thinking());
      sc_core::sc_time delay = keeper.get_local_time();
      if (random_() % 4 == 0) {  // something of the thread's own gets in between
        system.perform(cpu, random_() % 2 == 0, 0x10000 + static_cast<std::uint64_t>(cpu) * line_bytes, 0,
                       delay);
        pass(delay);
        delay = keeper.get_local_time();
      }
      const std::uint32_t value = system.perform(cpu, step.write, address_of(step.place),
                                                 static_cast<std::uint32_t>(step.value), delay);
      if (!step.write) registers_[step.reg] = static_cast<int>(value);
      pass(delay);
    }
    keeper.sync();
  }

  sc_core::sc_time thinking() {
    static constexpr int choices[] = {0, 0, 1, 7, 40, 90, 200};  // ns: less than a hit to more than a miss
    return {static_cast<double>(choices[random_() % std::size(choices)]), sc_core::SC_NS};
  }
  int any_cache() { return static_cast<int>(random_() % caches); }
  std::uint64_t address_of(std::size_t place) const { return base_ + place * (one_line_ ? 4 : line_bytes); }

  std::mt19937 random_{seed};
  sc_core::sc_event start_, end_;
  const LitmusTest* test_ = nullptr;
  bool one_line_ = false;
  std::uint64_t base_ = 0;
  std::vector<int> cpus_;
  std::vector<int> registers_;
  int running_ = 0;
  std::exception_ptr error_;
};

// Plays every test on every table; one simulation.
Findings play_all(const std::vector<Table>& tables, int rounds,
                  MemoryTime memory_time = MemoryTime::annotated) {
  std::vector<std::unique_ptr<Machine>> machines;
  for (const Table& table : tables) {
    for (const unsigned lines : {1u, 2u})
      machines.push_back(std::make_unique<Machine>(table.name() + "_" + std::to_string(lines) + "_", table,
                                                   lines, memory_time));
  }
  Findings findings;
  simulate([&] {
    for (const auto& machine : machines)
      for (const LitmusTest& test : litmus_tests())
        for (const bool one_line : {true, false}) machine->play(test, one_line, rounds, findings);
  });
  return findings;
}

std::vector<Table> named(const std::vector<std::string>& names) {
  std::vector<Table> tables;
  for (const std::string& name : names) tables.push_back(load_table(name));
  return tables;
}

// How many of the outcomes that sequential consistency allows were seen, and of how many.
std::pair<std::size_t, std::size_t> coverage(const Findings& findings) {
  std::size_t seen = 0, all = 0;
  for (const LitmusTest& test : litmus_tests()) {
    for (const Outcome& outcome : test.sequentially_consistent()) {
      ++all;
      seen += findings.seen.at(test.name()).count(outcome);
    }
  }
  return {seen, all};
}

void check_sequential(const Findings& findings) {
  INFO("seed " << seed << ", " << findings.rounds << " rounds");
  CHECK(findings.first == "");
  CHECK(findings.not_sequential == 0);
  const auto [seen, all] = coverage(findings);
  INFO(seen << " of " << all << " outcomes seen");
  CHECK(seen * 100 >= all * 95);  // else the threads did not mix enough to say anything
}

}  // namespace

TEST_CASE("no interleaving gives a litmus test's forbidden outcome, and each has as many as published",
          "[outside]") {
  const std::vector<LitmusTest> tests = litmus_tests();
  CHECK(tests.size() == 24);
  for (const LitmusTest& test : tests) {
    INFO(test.name());
    const std::set<Outcome> outcomes = test.sequentially_consistent();
    if (test.published_outcomes() != 0) CHECK(outcomes.size() == test.published_outcomes());
    CHECK(std::none_of(outcomes.begin(), outcomes.end(),
                       [&](const Outcome& each) { return test.forbids(each); }));
  }
}

TEST_CASE("dirty-owner-update is sequentially consistent on 24 litmus tests", "[outside]") {
  check_sequential(play_all(named({"dirty-owner-update"}), 400));
}
TEST_CASE("dragon is sequentially consistent on 24 litmus tests", "[outside]") {
  check_sequential(play_all(named({"dragon"}), 400));
}
TEST_CASE("mesi is sequentially consistent on 24 litmus tests", "[outside]") {
  check_sequential(play_all(named({"mesi"}), 400));
}
TEST_CASE("competitive-update with a limit of one is sequentially consistent on 24 litmus tests",
          "[outside]") {
  check_sequential(play_all({load_table("competitive-update", 1)}, 400));
}
TEST_CASE("the other built-in protocols are sequentially consistent on 24 litmus tests", "[outside]") {
  check_sequential(
      play_all(named({"write-through-update", "firefly", "msi", "moesi", "berkeley", "write-once"}), 100));
}

TEST_CASE("threads that run ahead by a quantum stay sequentially consistent", "[outside]") {
  tlm_utils::tlm_quantumkeeper::set_global_quantum(sc_core::sc_time(400, sc_core::SC_NS));
  check_sequential(play_all(named({"dirty-owner-update", "dragon", "mesi"}), 400));
}

TEST_CASE("a memory that really waits leaves the caches sequentially consistent", "[outside]") {
  check_sequential(play_all(named({"dirty-owner-update", "dragon", "firefly", "mesi", "write-once"}), 100,
                            MemoryTime::waits));
}

TEST_CASE("the litmus tests notice a protocol whose shared copies miss an update", "[outside]") {
  const Table dragon = load_table("dragon");
  const std::vector<State>& states = dragon.states();
  const auto named_sc = [](const State& each) { return each.name == "Sc"; };
  const auto shared =
      static_cast<StateId>(std::find_if(states.begin(), states.end(), named_sc) - states.begin());
  Row row = dragon.row(shared, Event::snoop_update, false);
  REQUIRE(row.take);
  row.take = false;
  const Table deaf = dragon.with_row(shared, Event::snoop_update, false, row);

  Machine machine("deaf_", deaf, 2, MemoryTime::annotated);
  for (const auto& cache : machine.system.caches)
    cache->set_observer(nullptr);  // or the monitor would be first
  Findings findings;
  simulate([&] {
    for (const LitmusTest& test : litmus_tests()) machine.play(test, true, 100, findings);
  });
  CHECK(findings.not_sequential > 0);
  std::size_t forbidden = 0;  // the tests whose own forbidden outcome came up
  for (const LitmusTest& test : litmus_tests()) {
    const std::set<Outcome>& seen = findings.seen.at(test.name());
    forbidden +=
        std::any_of(seen.begin(), seen.end(), [&](const Outcome& each) { return test.forbids(each); });
  }
  INFO(forbidden << " forbidden outcomes seen");
  CHECK(forbidden >= 12);
}
