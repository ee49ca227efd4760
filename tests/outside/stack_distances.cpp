// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// R. L. Mattson, J. Gecsei, D. R. Slutz, I. L. Traiger, "Evaluation Techniques for Storage Hierarchies", IBM
// Systems Journal 9(2), 1970: LRU is a stack algorithm. One pass over a stream gives the distance at which
// each line is found in a list ordered by last use, and a fully associative LRU cache of C lines misses
// exactly the uses with a distance greater than C, for every C at once. Here: that one pass, against the
// simulator for eight sizes.
#include <algorithm>
#include <catch2/catch.hpp>
#include <limits>
#include <vector>

#include "earshot/traffic/pattern.h"
#include "earshot/traffic/recording.h"
#include "played_system.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr std::uint64_t line_bytes = 32;
constexpr std::uint64_t never = std::numeric_limits<std::uint64_t>::max();

// The obvious form: a list, the line used last in front.
class LruStack {
 public:
  // 1 for the line used last; `never` for one not used before.
  std::uint64_t use(std::uint64_t line) {
    const auto found = std::find(lines_.begin(), lines_.end(), line);
    const std::uint64_t distance =
        found == lines_.end() ? never : static_cast<std::uint64_t>(found - lines_.begin()) + 1;
    if (found != lines_.end()) lines_.erase(found);
    lines_.insert(lines_.begin(), line);
    return distance;
  }
  std::uint64_t lines() const { return lines_.size(); }

 private:
  std::vector<std::uint64_t> lines_;
};

std::vector<std::uint64_t> distances(const std::vector<std::uint64_t>& lines) {
  LruStack stack;
  std::vector<std::uint64_t> all;
  for (const std::uint64_t line : lines) all.push_back(stack.use(line));
  return all;
}

const std::vector<std::uint64_t> sizes = {1, 4, 16, 32, 64, 128, 256, 512};  // lines

// Both answers for one stream, size by size, and what the stream was like.
struct BothAnswers {
  std::vector<std::uint64_t> predicted = std::vector<std::uint64_t>(sizes.size());
  std::vector<std::uint64_t> simulated;
  std::uint64_t accesses = 0;
  std::uint64_t crossing = 0;  // accesses that touch more than one line
  std::uint64_t lines = 0;
};

// One cache sees the whole stream, whoever made each access. Runs the simulation.
BothAnswers answers(AccessSource& source) {
  const Table mesi = load_table("mesi");
  std::vector<std::unique_ptr<PlayedSystem>> systems;
  for (const std::uint64_t lines : sizes) {
    const Geometry geometry{lines * line_bytes, static_cast<unsigned>(lines), line_bytes, Replacement::lru,
                            1};
    systems.push_back(
        std::make_unique<PlayedSystem>("lines" + std::to_string(lines) + "_", mesi, 1, geometry));
  }
  BothAnswers both;
  LruStack stack;
  simulate([&] {
    sc_core::sc_time unattended;
    for (Access access; source.next(access);) {
      if (access.op == AccessOp::replace) continue;
      ++both.accesses;
      const std::uint64_t first = access.address / line_bytes,
                          last = (access.address + access.size - 1) / line_bytes;
      if (first != last) ++both.crossing;
      for (std::uint64_t line = first; line <= last; ++line) {
        const std::uint64_t distance = stack.use(line);
        for (std::size_t i = 0; i < sizes.size(); ++i) both.predicted[i] += distance > sizes[i] ? 1 : 0;
      }
      for (const auto& system : systems) system->players.front()->perform(access, unattended);
      if (both.accesses % 1000 == 0) {  // let time pass, so that the buses may forget
        sc_core::wait(unattended);
        unattended = sc_core::SC_ZERO_TIME;
      }
    }
  });
  for (const auto& system : systems) both.simulated.push_back(system->bus->totals().block_reads);
  both.lines = stack.lines();
  return both;
}

// Each size must have told something: not all misses, not only the first uses, each size other than the next.
void check_that_sizes_matter(const BothAnswers& both) {
  for (std::size_t i = 1; i < sizes.size(); ++i) CHECK(both.simulated[i] < both.simulated[i - 1]);
  CHECK(both.simulated.back() >= both.lines);
}

}  // namespace

// Derived by hand from the strings; with misses(C) = distances greater than C they give the published LRU
// counts of replacement_faults.cpp.
TEST_CASE("the stack distances of Belady's and Silberschatz's strings are those worked out by hand",
          "[outside]") {
  CHECK(distances({1, 2, 3, 4, 1, 2, 5, 1, 2, 3, 4, 5}) ==
        std::vector<std::uint64_t>{never, never, never, never, 4, 4, never, 3, 3, 5, 5, 5});
  CHECK(distances({7, 0, 1, 2, 0, 3, 0, 4, 2, 3, 0, 3, 2, 1, 2, 0, 1, 7, 0, 1}) ==
        std::vector<std::uint64_t>{never, never, never, never, 3, never, 2, never, 4, 4,
                                   4,     2,     3,     5,     2, 4,     3, 6,     3, 3});
}

TEST_CASE("one pass of LRU stack distances gives the simulator's misses for the demo recording",
          "[outside]") {
  const auto recording = open_recording(EARSHOT_SOURCE "/configs/recordings/sonar-buoy.earshot.zst");
  const BothAnswers both = answers(*recording);
  CHECK(both.accesses >= 200000);
  CHECK(both.simulated == both.predicted);
  check_that_sizes_matter(both);
}

TEST_CASE("one pass of LRU stack distances gives the simulator's misses for random accesses across lines",
          "[outside]") {
  // Words of a seeded pattern, moved and stretched so that some cross into the next line.
  class Stretched : public AccessSource {
   public:
    bool next(Access& access) override {
      if (!words_->next(access)) return false;
      access.has_value = false;
      access.address += access.address / 64 % 29;
      access.size = 1 + static_cast<std::uint32_t>(access.address * 7 % 70);
      return true;
    }

   private:
    std::unique_ptr<AccessSource> words_ = make_pattern([] {
      PatternConfig config;
      config.accesses = 5000;
      config.lines = 700;
      config.line_bytes = line_bytes;
      config.seed = 1970;
      return config;
    }());
  } source;
  const BothAnswers both = answers(source);
  CHECK(both.accesses == 20000);
  CHECK(both.crossing > 5000);
  CHECK(both.simulated == both.predicted);
  check_that_sizes_matter(both);
}
