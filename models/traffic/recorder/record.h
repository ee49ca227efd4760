// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Records the memory accesses of a real program: one that was compiled with -fsanitize=thread and linked with
// libearshot_recorder instead of the sanitizer's library (README.md beside this file says how, and what a
// recording made this way does not contain).
//
// Two modes. One at a time, threads take turns: the order and the values are exact, and the same seed gives
// the same recording, byte for byte, on the same machine. Free running, threads run as they would: the order
// between them is approximate, there are no values, and no two recordings are alike.
//
// Pure C++, Linux. One recording at a time in a process: signals are handled meanwhile.
#pragma once

#include <cstdint>
#include <stdexcept>
#include <string>
#include <vector>

namespace earshot {

struct RecordOptions {
  std::string into;                  // the recording; its name says its form, see create_recording()
  std::vector<std::string> program;  // the program, looked up in PATH like a shell does, and its arguments
  std::uint64_t seed = 1;            // decides who runs when; one at a time only
  bool free_running = false;
  std::uint64_t limit = 0;       // accesses after which the program runs on unrecorded; 0: no limit
  std::uint32_t hand_over = 16;  // mean accesses between two hand-overs, 1 to 1,000,000; one at a time only
};

struct RecordResult {
  std::uint64_t reads = 0;  // accesses in the recording, the added writes included
  std::uint64_t writes = 0;
  std::uint64_t first_read_bytes =
      0;  // bytes first read, then written or never: what they held before is learned
  std::uint64_t added_writes = 0;  // put in before reads of what code without hooks had written
  std::uint32_t threads = 0;       // started, the first one included
  std::uint32_t most_alive = 0;    // threads at once: initiators in the recording
  std::uint64_t hand_overs = 0;
  bool limit_reached = false;
  bool addresses_fixed = true;  // false: the system would not switch off address randomisation
  int exit_status = 0;          // of the program, if it exited
  int signal = 0;               // that ended the program, or 0
  std::string deadlock;         // what the program's threads wait for, if they did for ever
};

// Nothing was recorded: the program cannot be run, or has no hooks.
class RecordError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// Runs the program to its end and writes the recording, also of a program that crashes or waits for ever. The
// program has this process's standard streams. Throws RecordError, or RecordingError if the file cannot be
// written; then there is no file of that name that was not there before.
RecordResult record_program(const RecordOptions& options);

// What a person wants to know afterwards, in whole lines.
std::string summary_of(const RecordOptions& options, const RecordResult& result);

// The exit status of the command: the program's own, 128 and the signal's number if a signal ended it, 1 if
// it waited for ever.
int exit_status_of(const RecordResult& result);

}  // namespace earshot
