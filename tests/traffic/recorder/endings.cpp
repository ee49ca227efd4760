// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <catch2/catch.hpp>
#include <csignal>
#include <set>

#include "recording_of.h"

namespace earshot {
namespace {

Recorded ending(const std::string& how, const RecordOptions& options = {}) {
  return recording_of({program_in("native-O2", "endings_c"), how}, options);
}

// The writes, 1000 at most, with which programs/endings.c begins.
bool begins_with_writes(const std::vector<Access>& accesses, std::ptrdiff_t count = 1000) {
  const auto first = std::find_if(accesses.begin(), accesses.end(), [](const Access& access) {
    return access.op == AccessOp::write && access.size == 4 && access.value == 0;
  });
  if (accesses.end() - first < count) return false;
  for (std::ptrdiff_t i = 0; i < count; ++i) {
    const auto n = static_cast<std::uint64_t>(i);
    if (first[i].op != AccessOp::write || first[i].address != first->address + 4 * n || first[i].value != n) {
      return false;
    }
  }
  return true;
}

TEST_CASE("however a program ends, what it did before is recorded, and its end is passed on") {
  struct Case {
    const char* how;
    int exit_status, signal, status_of_command;
  };
  for (const Case& c :
       {Case{"return", 0, 0, 0}, Case{"status", 3, 0, 3}, Case{"exit", 2, 0, 2}, Case{"_exit", 4, 0, 4},
        Case{"abort", 0, SIGABRT, 134}, Case{"crash", 0, SIGSEGV, 139}, Case{"kill", 0, SIGKILL, 137},
        Case{"never-joined", 0, 0, 0}, Case{"detached", 5, 0, 5}, Case{"main-leaves", 0, 0, 0},
        Case{"cancel", 0, 0, 0}, Case{"fork", 0, 0, 0}, Case{"pipe", 0, 0, 0}, Case{"unmapped", 0, 0, 0}}) {
    INFO(c.how);
    const Recorded recorded = ending(c.how);
    // A write is recorded a moment after it is made: one that nothing came after may be missing.
    const bool at_once = c.signal == SIGSEGV || c.signal == SIGKILL;
    CHECK(begins_with_writes(recorded.accesses, at_once ? 999 : 1000));
    CHECK(recorded.result.exit_status == c.exit_status);
    CHECK(recorded.result.signal == c.signal);
    CHECK(recorded.result.deadlock.empty());
    CHECK(exit_status_of(recorded.result) == c.status_of_command);
    CHECK(wrong_reads(recorded.accesses) == 0);
  }
}

TEST_CASE("the summary says how a program ended unless it ended well") {
  const Recorded crashed = ending("crash");
  CHECK(crashed.summary.find(
            "endings_c was ended by signal 11 (Segmentation fault); what it did before is recorded\n") !=
        std::string::npos);
  CHECK(ending("status").summary.find("endings_c ended with exit status 3\n") != std::string::npos);
}

TEST_CASE("the summary gives threads, accesses, what was learned, order and seed") {
  RecordOptions options;
  options.into = "engine.earshot";
  options.program = {"build/engine"};
  options.seed = 7;
  RecordResult result;
  result.reads = 1'234'567;
  result.writes = 89;
  result.first_read_bytes = 4'161;
  result.added_writes = 3;
  result.threads = 9;
  result.most_alive = 4;
  result.hand_overs = 1'000;
  CHECK(
      summary_of(options, result) ==
      "engine.earshot: 1,234,656 accesses (1,234,567 reads, 89 writes) of 9 threads, 4 at once\n"
      "order and values exact; seed 7, 1,000 hand-overs\n"
      "learned: 4,161 bytes held a value before the recording; 3 writes by code without hooks, put in before "
      "their first read\n");
  result.addresses_fixed = false;
  CHECK(summary_of(options, result)
            .find("\nthe system would not switch off address randomisation: another run has "
                  "other addresses\n") != std::string::npos);
  options.free_running = true;
  CHECK(summary_of(options, result) ==
        "engine.earshot: 1,234,656 accesses (1,234,567 reads, 89 writes) of 9 threads, 4 at once\n"
        "order between threads approximate, no values: threads ran freely\n");
}

TEST_CASE("what is reported is what was recorded") {
  const RecordResult result = ending("return").result;
  CHECK(result.reads == 1);  // of a word of the command line
  CHECK(result.writes == 1000);
  CHECK(result.first_read_bytes == 8);
  CHECK(result.added_writes == 0);
  CHECK(result.threads == 1);
}

TEST_CASE("a program that waits for ever is ended with a message saying who waits where") {
  const Recorded recorded = ending("deadlock");
  INFO(recorded.summary);
  CHECK(begins_with_writes(recorded.accesses));
  CHECK(exit_status_of(recorded.result) == 1);
  const std::string& message = recorded.result.deadlock;
  CHECK(message.find("the program waits for ever: every thread waits for another.\n  thread 0 in "
                     "pthread_mutex_lock on 0x") == 0);
  CHECK(message.find("\n  thread 1 in pthread_mutex_lock on 0x") != std::string::npos);
}

TEST_CASE("the limit ends the recording at exactly that many accesses, not the program") {
  RecordOptions options;
  options.limit = 500;
  const Recorded recorded = ending("status", options);
  CHECK(recorded.accesses.size() == 500);
  CHECK(recorded.result.limit_reached);
  CHECK(recorded.result.exit_status == 3);
  const Recorded whole = ending("status");
  if (can_be_repeated(whole)) {
    CHECK(std::equal(recorded.accesses.begin(), recorded.accesses.end(), whole.accesses.begin()));
  }
  CHECK_FALSE(whole.result.limit_reached);
}

TEST_CASE("numbers of threads that have ended are used again") {
  const Recorded recorded = ending("200-threads-in-turn");
  CHECK(recorded.result.threads == 201);
  CHECK(recorded.result.most_alive == 2);
  std::set<std::uint32_t> initiators;
  for (const Access& access : recorded.accesses) initiators.insert(access.initiator);
  CHECK(*initiators.rbegin() <= 1);
}

TEST_CASE("a program that cannot be recorded is refused with the reason, and no file is left") {
  const std::string ending_program = program_in("native-O2", "endings_c");
  const std::string recorded = std::string(EARSHOT_RECORDED) + "/";
  CHECK(record_error_of({ending_program, "64-threads"}) ==
        "native-O2/endings_c: the program has more than 64 threads at once, and a recording holds 64 "
        "initiators.");
  CHECK(record_error_of({recorded + "recorder_absent"}) ==
        "recorder_absent (exit status 0): nothing was recorded; the program has no recorder in it. Compile "
        "it with "
        "-fsanitize=thread and link it with earshot_recorder instead of that option: "
        "earshot_recordable(TARGET) in "
        "CMake, or pkg-config --variable=compile_flags and --variable=link_flags earshot-recorder");
  CHECK(record_error_of({recorded + "recorder_without_hooks"}) ==
        "recorder_without_hooks (exit status 0): nothing was recorded; the recorder is in the program, but "
        "none of the "
        "code that ran has hooks. Compile the program's own sources with -fsanitize=thread");
  CHECK(record_error_of({recorded + "missing"}) == "missing: there is no such program");
  CHECK(record_error_of({"no-program-of-this-name"}) ==
        "no-program-of-this-name: there is no such program in PATH; for one in this directory say "
        "./no-program-of-this-name");
  CHECK(record_error_of({ending_program + ".o"}) ==
        "native-O2/endings_c.o: is not a program that may be run");
  CHECK(record_error_of({}) == "no program was named");
  RecordOptions options;
  options.hand_over = 0;
  CHECK(record_error_of({ending_program}, options) == "hand-over after 0 accesses: expected 1 to 1000000");
}

TEST_CASE("a recording that cannot be written is an error before the program starts") {
  RecordOptions options;
  options.into = "/nonexistent/recording";
  options.program = {program_in("native-O2", "endings_c"), "kill"};
  CHECK_THROWS_WITH(record_program(options),
                    "/nonexistent/recording: cannot be created: No such file or directory");
}

}  // namespace
}  // namespace earshot
