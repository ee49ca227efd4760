// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The litmus tests of litmus_tests.h on caches in arbitrated timing, over many seeded timings: every built-in
// protocol, both structures of the bus, caches of one line and of four, memory that takes from 5 to 200 ns.
// With one access outstanding a thread, sequential consistency: no forbidden outcome, none that is not an
// interleaving. With several, what is in one line keeps its order, which is more than the one-location tests
// ask for; between lines there is none, and the relaxed outcomes that this allows do come up.
#include <algorithm>
#include <catch2/catch.hpp>
#include <map>
#include <random>

#include "arbitrated.h"
#include "litmus_tests.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr int caches = 4;
constexpr std::uint32_t seed = 1979;

enum class Manner { one_outstanding, several_outstanding };

struct Findings {
  std::uint64_t rounds = 0;
  std::uint64_t not_sequential = 0;
  std::string first;                              // of those
  std::map<std::string, std::set<Outcome>> seen;  // by test
};

struct PreparedTest {
  LitmusTest test;
  std::set<Outcome> allowed;
};

const std::vector<PreparedTest>& prepared_tests() {
  static const std::vector<PreparedTest> all = [] {
    std::vector<PreparedTest> prepared;
    for (const LitmusTest& test : litmus_tests()) prepared.push_back({test, test.sequentially_consistent()});
    return prepared;
  }();
  return all;
}

class Machine : public sc_core::sc_module {
 public:
  Machine(sc_core::sc_module_name name, const Table& table, BusStructure structure, unsigned lines,
          bool watched = true)
      : sc_module(name), bench(table, options(structure, lines, watched)) {
    bench.memory.answer = [this](tlm::tlm_generic_payload& payload, tlm::tlm_phase&, sc_core::sc_time& time) {
      bench.memory.move(payload);
      time += from_ps(5000 + random_() % 4 * 65000);
      return tlm::TLM_COMPLETED;
    };
    for (std::size_t i = 0; i < caches; ++i)
      sc_core::sc_spawn([this, i] { thread(i); }, ("thread" + std::to_string(i)).c_str());
  }

  // From a simulation process.
  void play(const PreparedTest& prepared, bool one_line, Manner manner, int rounds, Findings& findings) {
    const LitmusTest& test = prepared.test;
    for (int round = 0; round < rounds; ++round) {
      const Outcome outcome = play_once(test, one_line, manner);
      ++findings.rounds;
      findings.seen[test.name()].insert(outcome);
      if (!test.forbids(outcome) && prepared.allowed.count(outcome) == 1) continue;
      if (findings.not_sequential++ > 0) continue;
      findings.first = std::string(name()) + ", test " + test.name() + ", round " + std::to_string(round) +
                       (one_line ? ", one line" : ", three lines") + ": outcome";
      for (const int value : outcome) findings.first += " " + std::to_string(value);
    }
  }

  Bench bench;

 private:
  static BenchOptions options(BusStructure structure, unsigned lines, bool watched) {
    BenchOptions options;
    options.caches = caches;
    options.geometry = {std::uint64_t{lines} * 32, lines, 32, Replacement::lru, 1};
    options.bus.structure = structure;
    options.bus.arbiter.kind = Arbitration::lottery;
    options.watched = watched;
    return options;
  }

  Outcome play_once(const LitmusTest& test, bool one_line, Manner manner) {
    one_line_ = one_line;
    base_ = (random_() % 8) * 4 * 32;
    registers_.assign(test.registers(), -1);
    cpus_ = {0, 1, 2, 3};
    for (std::size_t i = cpus_.size() - 1; i > 0; --i) std::swap(cpus_[i], cpus_[random_() % (i + 1)]);

    // The start values, each written by anybody, and some copies here and there.
    for (std::size_t place = 0; place < places; ++place)
      any_cpu().write(address_of(place), static_cast<std::uint32_t>(test.start()[place]));
    for (std::uint64_t copies = random_() % 8; copies > 0; --copies)
      any_cpu().read(address_of(random_() % places));
    if (random_() % 2 == 0) sc_core::wait(ns(400));

    test_ = &test;
    manner_ = manner;
    running_ = test.threads().size();
    start_.notify(sc_core::SC_ZERO_TIME);
    sc_core::wait(end_);
    Memory memory;
    for (std::size_t place = 0; place < places; ++place)
      memory[place] = static_cast<int>(any_cpu().read(address_of(place)));
    return test.outcome(registers_, memory);
  }

  void thread(std::size_t number) {
    for (;;) {
      sc_core::wait(start_);
      if (number >= test_->threads().size()) continue;
      if (manner_ == Manner::one_outstanding)
        play_thread(test_->threads()[number], cpus_[number]);
      else
        send_thread(test_->threads()[number], cpus_[number]);
      if (--running_ == 0) end_.notify(sc_core::SC_ZERO_TIME);
    }
  }

  void play_thread(const std::vector<LitmusTest::Step>& steps, int who) {
    Requester& cpu = bench.cpu(who);
    for (const LitmusTest::Step& step : steps) {
      sc_core::wait(thinking());
      if (random_() % 4 == 0)
        cpu.write(0x10000 + static_cast<std::uint64_t>(who) * 32, 0);  // something of its own
      if (step.write)
        cpu.write(address_of(step.place), static_cast<std::uint32_t>(step.value));
      else
        registers_[step.reg] = static_cast<int>(cpu.read(address_of(step.place)));
    }
  }

  // Sends every step as soon as the one before has ended its request.
  void send_thread(const std::vector<LitmusTest::Step>& steps, int who) {
    Requester& cpu = bench.cpu(who);
    std::vector<std::pair<const Requester::Access*, const LitmusTest::Step*>> sent;
    sc_core::wait(thinking());
    for (const LitmusTest::Step& step : steps) {
      const std::uint64_t address = address_of(step.place);
      sent.emplace_back(step.write ? &cpu.send_write("", address, static_cast<std::uint32_t>(step.value))
                                   : &cpu.send_read("", address),
                        &step);
      const Requester::Access& access = *sent.back().first;
      while (access.ended_request == 0 && access.responded == 0) sc_core::wait(cpu.changed);
      sc_core::wait(from_ps(random_() % 3 * 700));
    }
    for (const auto& [access, step] : sent) {
      while (access->responded == 0) sc_core::wait(cpu.changed);
      if (!step->write) registers_[step->reg] = static_cast<int>(access->value());
    }
    sc_core::wait(sc_core::SC_ZERO_TIME);  // out of the last response's call
    cpu.forget();
  }

  sc_core::sc_time thinking() {
    static constexpr Picoseconds choices[] = {0,  0,  1,  7,
                                              23, 40, 90, 200};  // ns: less than a hit to more than a miss
    return from_ps(choices[random_() % std::size(choices)] * 1000 + random_() % 3 * 300);
  }
  Requester& any_cpu() { return bench.cpu(static_cast<int>(random_() % caches)); }
  std::uint64_t address_of(std::size_t place) const { return base_ + place * (one_line_ ? 4 : 32); }

  std::mt19937 random_{seed};
  sc_core::sc_event start_{"start"}, end_{"end"};
  const LitmusTest* test_ = nullptr;
  Manner manner_ = Manner::one_outstanding;
  std::size_t running_ = 0;
  bool one_line_ = false;
  std::uint64_t base_ = 0;
  std::vector<int> cpus_;
  std::vector<int> registers_;
};

std::vector<std::unique_ptr<Machine>> machines_for(const Table& table) {
  std::vector<std::unique_ptr<Machine>> machines;
  for (const int kind : {0, 1})
    for (const unsigned lines : {1u, 4u})
      machines.push_back(std::make_unique<Machine>(
          (table.name() + (kind == 0 ? "_split_" : "_connected_") + std::to_string(lines)).c_str(), table,
          structure(kind), lines));
  return machines;
}

// How many of the outcomes that sequential consistency allows were seen, in percent.
std::size_t coverage(const Findings& findings) {
  std::size_t seen = 0, all = 0;
  for (const PreparedTest& prepared : prepared_tests())
    for (const Outcome& outcome : prepared.allowed) {
      ++all;
      seen += findings.seen.at(prepared.test.name()).count(outcome);
    }
  return seen * 100 / all;
}

void check_one_outstanding(const Table& table) {
  const auto machines = machines_for(table);
  Findings findings;
  simulate([&] {
    for (const auto& machine : machines)
      for (const PreparedTest& test : prepared_tests())
        for (const bool one_line : {true, false})
          machine->play(test, one_line, Manner::one_outstanding, 80, findings);
    for (const auto& machine : machines) CHECK(machine->bench.broken_laws() == "");
  });
  INFO("seed " << seed << ", " << findings.rounds << " rounds");
  CHECK(findings.first == "");
  CHECK(findings.not_sequential == 0);
  CHECK(coverage(findings) >= 95);  // else the threads did not mix enough to say anything
}

bool one_location(const LitmusTest& test) {
  for (const auto& thread : test.threads())
    for (const LitmusTest::Step& step : thread)
      if (step.place != 0) return false;
  return true;
}

void check_several_outstanding(const Table& table) {
  const auto machines = machines_for(table);
  Findings ordered, relaxed;
  simulate([&] {
    for (const auto& machine : machines)
      for (const PreparedTest& test : prepared_tests()) {
        if (one_location(test.test)) {
          machine->play(test, false, Manner::several_outstanding, 160, ordered);
        } else {
          machine->play(test, true, Manner::several_outstanding, 40, ordered);
          machine->play(test, false, Manner::several_outstanding, 40, relaxed);
        }
      }
    for (const auto& machine : machines) CHECK(machine->bench.broken_laws() == "");
  });
  INFO("seed " << seed << ", " << ordered.rounds << " rounds");
  CHECK(ordered.first == "");
  CHECK(ordered.not_sequential == 0);
  // Several really are outstanding: two lines show what one access at a time never does.
  std::string forbidden;
  for (const PreparedTest& prepared : prepared_tests()) {
    if (one_location(prepared.test)) continue;
    const std::set<Outcome>& seen = relaxed.seen.at(prepared.test.name());
    if (std::any_of(seen.begin(), seen.end(),
                    [&](const Outcome& each) { return prepared.test.forbids(each); }))
      forbidden += " " + prepared.test.name();
  }
  INFO("relaxed:" << forbidden);
  CHECK(forbidden.find(" SB") != std::string::npos);
  CHECK(std::count(forbidden.begin(), forbidden.end(), ' ') >= 3);
}

}  // namespace

#define EARSHOT_LITMUS(protocol)                                                                          \
  TEST_CASE("arbitrated, one outstanding: " protocol " is sequentially consistent on 24 litmus tests",    \
            "[outside]") {                                                                                \
    check_one_outstanding(load_table(protocol));                                                          \
  }                                                                                                       \
  TEST_CASE("arbitrated, several outstanding: " protocol " keeps the order in a line, not between lines", \
            "[outside]") {                                                                                \
    check_several_outstanding(load_table(protocol));                                                      \
  }
EARSHOT_LITMUS("write-through-update")
EARSHOT_LITMUS("dirty-owner-update")
EARSHOT_LITMUS("dragon")
EARSHOT_LITMUS("firefly")
EARSHOT_LITMUS("competitive-update")
EARSHOT_LITMUS("msi")
EARSHOT_LITMUS("mesi")
EARSHOT_LITMUS("moesi")
EARSHOT_LITMUS("berkeley")
EARSHOT_LITMUS("write-once")
#undef EARSHOT_LITMUS

TEST_CASE("arbitrated: competitive-update with a limit of one is sequentially consistent on 24 litmus tests",
          "[outside]") {
  check_one_outstanding(load_table("competitive-update", 1));
}

TEST_CASE("arbitrated: the one-location tests notice a protocol whose shared copies miss an update",
          "[outside]") {
  const Table dragon = load_table("dragon");
  const std::vector<State>& states = dragon.states();
  const auto shared = static_cast<StateId>(
      std::find_if(states.begin(), states.end(), [](const State& each) { return each.name == "Sc"; }) -
      states.begin());
  Row row = dragon.row(shared, Event::snoop_update, false);
  REQUIRE(row.take);
  row.take = false;
  Machine machine("deaf", dragon.with_row(shared, Event::snoop_update, false, row), BusStructure::split, 4,
                  false);
  Findings findings;
  simulate([&] {
    for (const PreparedTest& test : prepared_tests())
      if (one_location(test.test)) machine.play(test, true, Manner::several_outstanding, 100, findings);
  });
  std::size_t forbidden = 0;  // the tests whose own forbidden outcome came up
  for (const PreparedTest& prepared : prepared_tests()) {
    if (!one_location(prepared.test)) continue;
    const std::set<Outcome>& seen = findings.seen.at(prepared.test.name());
    forbidden += std::any_of(seen.begin(), seen.end(),
                             [&](const Outcome& each) { return prepared.test.forbids(each); });
  }
  CHECK(findings.not_sequential > 0);
  CHECK(forbidden >= 3);
}
