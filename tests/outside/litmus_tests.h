// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Litmus tests as data, and which outcomes a sequentially consistent machine may show: L. Lamport, "How to
// Make a Multiprocessor Computer That Correctly Executes Multiprocess Programs", IEEE Transactions on
// Computers C-28(9), 1979. Pure C++, no simulation.
#pragma once

#include <array>
#include <set>
#include <sstream>
#include <stdexcept>
#include <string>
#include <utility>
#include <vector>

namespace earshot::test {

struct LitmusText {
  const char* name;
  const char* threads;    // "x=1; r0=y | y=1; r1=x": steps in program order, threads between bars
  const char* forbidden;  // "r0=0 r1=0": registers, or locations at the end
  std::size_t outcomes;   // how many a sequentially consistent machine can show; 0: no number is published
  int x_starts = 0;       // y and z start at 0
};

// Names as in L. Maranget, S. Sarkar, P. Sewell, "A Tutorial Introduction to the ARM and POWER Relaxed Memory
// Models", 2012, and J. Alglave, L. Maranget, M. Tautschnig, "Herding Cats", ACM TOPLAS 36(2), 2014; those
// marked (m) are from memory. SB, MP, LB, WRC: also P. Sewell et al., "x86-TSO", Communications of the ACM
// 53(7), 2010, examples 8-3, 8-1, 8-2, 8-6. SB and MP: tests 8 and 7 (with barriers), Alpha-2, -3, -9: tests
// 2, 3 and 9 of the "Alpha Architecture Handbook", Compaq, section 5.6.2. LB: Intel, "Software Developer's
// Manual" volume 3, 8.2.3.3. The numbers of outcomes are derived from all interleavings: registers, and the
// locations at the end where the forbidden outcome speaks of them.
// clang-format off
constexpr LitmusText litmus_texts[] = {
    {"SB",      "x=1; r0=y | y=1; r1=x",                 "r0=0 r1=0",           3},
    {"MP",      "x=1; y=1 | r0=y; r1=x",                 "r0=1 r1=0",           3},
    {"LB",      "r0=x; y=1 | r1=y; x=1",                 "r0=1 r1=1",           3},
    {"WRC",     "x=1 | r0=x; y=1 | r1=y; r2=x",          "r0=1 r1=1 r2=0",      7},
    {"RWC",     "x=1 | r0=x; r1=y | y=1; r2=x",          "r0=1 r1=0 r2=0",      7},  // (m)
    {"IRIW",    "x=1 | r0=x; r1=y | y=1 | r2=y; r3=x",   "r0=1 r1=0 r2=1 r3=0", 15},
    {"ISA2",    "x=1; y=1 | r0=y; z=1 | r1=z; r2=x",     "r0=1 r1=1 r2=0",      7},
    {"R",       "x=1; y=1 | y=2; r0=x",                  "y=2 r0=0",            3},  // (m)
    {"S",       "x=2; y=1 | r0=y; x=1",                  "r0=1 x=2",            3},  // (m)
    {"2+2W",    "x=1; y=2 | y=1; x=2",                   "x=1 y=1",             3},  // (m)
    {"W+RWC",   "x=1; y=1 | r0=y; r1=z | z=1; r2=x",     "r0=1 r1=0 r2=0",      7},  // (m)
    {"WWC",     "x=2 | r0=x; y=1 | r1=y; x=1",           "r0=2 r1=1 x=2",       9},  // (m)
    {"IRRWIW",  "x=2 | r0=x; r1=y | y=1 | r2=y; x=1",    "r0=2 r1=0 r2=1 x=2",  21}, // (m)
    {"3.SB",    "x=1; r0=y | y=1; r1=z | z=1; r2=x",     "r0=0 r1=0 r2=0",      7},  // (m)
    {"3.LB",    "r0=x; y=1 | r1=y; z=1 | r2=z; x=1",     "r0=1 r1=1 r2=1",      7},  // (m)
    // One location: these hold in any coherent memory, sequentially consistent or not.
    {"CoRR",    "x=1 | r0=x; r1=x",                      "r0=1 r1=0",           3},  // (m)
    {"CoRR2",   "x=1 | x=2 | r0=x; r1=x | r2=x; r3=x",   "r0=1 r1=2 r2=2 r3=1", 47}, // (m)
    {"CoWW",    "x=1; x=2",                              "x=1",                 1},  // (m)
    {"CoRW1",   "r0=x; x=1",                             "r0=1",                1},  // (m)
    {"CoRW2",   "r0=x; x=1 | x=2",                       "r0=2 x=2",            3},  // (m)
    {"CoWR",    "x=1; r0=x | x=2",                       "r0=2 x=1",            3},  // (m)
    {"Alpha-2", "x=2 | x=3; r0=x; r1=x",                 "r0=2 r1=3",           0, 1},
    {"Alpha-3", "x=2; r0=x | x=3 | r1=x; r2=x",          "r0=3 r1=3 r2=2",      0, 1},
    {"Alpha-9", "x=2; r0=x; r1=x | x=3; r2=x; r3=x",     "r0=2 r1=3 r2=3 r3=2", 0, 1},
};
// clang-format on

constexpr std::size_t places = 3;  // x, y, z
using Memory = std::array<int, places>;
using Outcome = std::vector<int>;  // registers, then x, y, z at the end if the test asks for them

class LitmusTest {
 public:
  struct Step {
    bool write;
    std::size_t place;
    int value;        // of a write
    std::size_t reg;  // of a read
  };

  explicit LitmusTest(const LitmusText& text) : text_(text) {
    std::istringstream threads(text.threads);
    for (std::string thread; std::getline(threads, thread, '|');) {
      threads_.emplace_back();
      std::istringstream steps(thread);
      for (std::string step; std::getline(steps, step, ';');) threads_.back().push_back(step_from(step));
    }
    std::istringstream terms(text.forbidden);
    for (std::string term; terms >> term;) {
      const auto [left, right] = sides(term);
      if (left[0] != 'r') asks_memory_ = true;
      forbidden_.emplace_back(left[0] == 'r' ? number(left.substr(1)) : registers_ + place(left),
                              std::stoi(right));
    }
    start_[0] = text.x_starts;
  }

  std::string name() const { return text_.name; }
  std::size_t published_outcomes() const { return text_.outcomes; }
  const std::vector<std::vector<Step>>& threads() const { return threads_; }
  const Memory& start() const { return start_; }
  std::size_t registers() const { return registers_; }

  Outcome outcome(const std::vector<int>& registers, const Memory& memory) const {
    Outcome all = registers;
    if (asks_memory_) all.insert(all.end(), memory.begin(), memory.end());
    return all;
  }
  bool forbids(const Outcome& outcome) const {
    for (const auto& [at, value] : forbidden_)
      if (outcome[at] != value) return false;
    return true;
  }

  // The outcomes of all interleavings, each step one indivisible access to one memory.
  std::set<Outcome> sequentially_consistent() const {
    std::set<Outcome> all;
    interleave(std::vector<std::size_t>(threads_.size()), std::vector<int>(registers_), start_, all);
    return all;
  }

 private:
  static std::pair<std::string, std::string> sides(const std::string& text) {
    const std::size_t first = text.find_first_not_of(' '), equals = text.find('=');
    const std::size_t last = text.find_last_not_of(' ');
    if (equals == std::string::npos) throw std::invalid_argument(text);
    return {text.substr(first, equals - first), text.substr(equals + 1, last - equals)};
  }
  static std::size_t number(const std::string& text) { return static_cast<std::size_t>(std::stoul(text)); }
  static std::size_t place(const std::string& name) {
    if (name != "x" && name != "y" && name != "z") throw std::invalid_argument(name);
    return static_cast<std::size_t>(name[0] - 'x');
  }
  Step step_from(const std::string& text) {
    const auto [left, right] = sides(text);
    if (left[0] != 'r') return {true, place(left), std::stoi(right), 0};
    const std::size_t reg = number(left.substr(1));
    registers_ = std::max(registers_, reg + 1);
    return {false, place(right), 0, reg};
  }

  void interleave(const std::vector<std::size_t>& done, const std::vector<int>& registers,
                  const Memory& memory, std::set<Outcome>& all) const {
    bool finished = true;
    for (std::size_t i = 0; i < threads_.size(); ++i) {
      if (done[i] == threads_[i].size()) continue;
      finished = false;
      const Step& step = threads_[i][done[i]];
      std::vector<std::size_t> next_done = done;
      ++next_done[i];
      std::vector<int> next_registers = registers;
      Memory next_memory = memory;
      if (step.write)
        next_memory[step.place] = step.value;
      else
        next_registers[step.reg] = memory[step.place];
      interleave(next_done, next_registers, next_memory, all);
    }
    if (finished) all.insert(outcome(registers, memory));
  }

  LitmusText text_;
  std::vector<std::vector<Step>> threads_;
  std::vector<std::pair<std::size_t, int>> forbidden_;  // index into an Outcome, value
  std::size_t registers_ = 0;
  Memory start_{};
  bool asks_memory_ = false;
};

inline std::vector<LitmusTest> litmus_tests() {
  return std::vector<LitmusTest>(std::begin(litmus_texts), std::end(litmus_texts));
}

}  // namespace earshot::test
