// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>
#include <cstdlib>

#include "recording_of.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

const char* const everything[] = {"everything_c", "everything_cpp"};

TEST_CASE("replaying a recording over a map of bytes gives no wrong read, for C and C++, gcc and clang") {
  for (const std::string& build : builds()) {
    for (const char* const program : everything) {
      for (const std::uint64_t seed : {1, 2, 3}) {
        RecordOptions options;
        options.seed = seed;
        const Recorded recorded = recording_of({program_in(build, program)}, options);
        INFO(build << " " << program << ", seed " << seed << "\n" << recorded.summary);
        CHECK(recorded.result.exit_status == 0);
        CHECK(recorded.result.deadlock.empty());
        CHECK(wrong_reads(recorded.accesses) == 0);
        // What snprintf, the string class and other uninstrumented code wrote had to be learned, but is the
        // lesser part.
        CHECK(recorded.result.added_writes > 0);
        CHECK(recorded.result.added_writes < recorded.accesses.size() / 10);
      }
    }
  }
}

TEST_CASE(
    "a program that waits on futexes and pipes, and handles signals, is recorded without a wrong read") {
  for (const std::string& build : builds()) {
    for (const bool free_running : {false, true}) {
      RecordOptions options;
      options.free_running = free_running;
      const Recorded recorded = recording_of({program_in(build, "waiting_cpp")}, options);
      INFO(build << "\n" << recorded.summary);
      CHECK(recorded.result.exit_status == 0);
      CHECK(recorded.result.deadlock.empty());
      if (!free_running) CHECK(wrong_reads(recorded.accesses) == 0);
    }
  }
}

TEST_CASE("the same seed gives the same recording, byte for byte, and another seed another one") {
  for (const std::string& build : builds()) {
    for (const char* const program : everything) {
      INFO(build << " " << program);
      const Recorded first = recording_of({program_in(build, program)});
      const Recorded second = recording_of({program_in(build, program)});
      if (can_be_repeated(first)) CHECK(first.bytes == second.bytes);
      RecordOptions other_seed;
      other_seed.seed = 2;
      CHECK(recording_of({program_in(build, program)}, other_seed).accesses != first.accesses);
    }
  }
}

TEST_CASE("the recording does not depend on the environment") {
  const std::vector<std::string> program = {program_in("native-O2", "everything_cpp")};
  const Recorded before = recording_of(program);
  REQUIRE(setenv("EARSHOT_TEST_VARIABLE", std::string(5001, 'e').c_str(), 1) == 0);
  const Recorded after = recording_of(program);
  unsetenv("EARSHOT_TEST_VARIABLE");
  if (can_be_repeated(before)) CHECK(before.bytes == after.bytes);
}

TEST_CASE("a program linked with the recorder runs by itself, too") {
  for (const std::string& build : builds()) {
    for (const char* const program : everything) CHECK(std::system(program_in(build, program).c_str()) == 0);
  }
}

TEST_CASE("free running, order is said to be approximate and there are no values") {
  RecordOptions options;
  options.free_running = true;
  for (const std::string& build : builds()) {
    for (const char* const program : everything) {
      const Recorded recorded = recording_of({program_in(build, program)}, options);
      INFO(build << " " << program);
      CHECK(recorded.result.exit_status == 0);
      CHECK_FALSE(recorded.notes.exact_order);
      CHECK(recorded.accesses.size() > 1000);
      for (const Access& access : recorded.accesses) REQUIRE_FALSE(access.has_value);
    }
  }
}

TEST_CASE("the notes of a recording say how it was made, and name no folder") {
  RecordOptions options;
  options.seed = 9;
  options.hand_over = 50;
  options.limit = 10;
  const Recorded exact = recording_of({program_in("native-O2", "endings_c"), "return", "a\nb"}, options);
  CHECK(exact.notes.exact_order);
  CHECK(
      exact.notes.text ==
      "earshot record: endings_c return a?b; one at a time, seed 9, hand-over after 50 accesses on average; "
      "limited to 10 accesses");
  options.free_running = true;
  options.limit = 0;
  CHECK(recording_of({program_in("native-O2", "endings_c"), "return"}, options).notes.text ==
        "earshot record: endings_c return; free running");
}

}  // namespace
}  // namespace earshot
