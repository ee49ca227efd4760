// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recorder/record.h"

#include <linux/futex.h>
#include <signal.h>
#include <sys/syscall.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#include <cstring>
#include <memory>

#include "earshot/traffic/recorder/learned_bytes.h"
#include "earshot/traffic/recorder/recorded_process.h"
#include "earshot/traffic/recorder/shared_ring.h"
#include "earshot/traffic/recording.h"

namespace earshot {

namespace {

using recorder::RecordKind;
using recorder::ring_records;
using recorder::RingHeader;
using recorder::RingRecord;

// Turns records into accesses of the recording.
class Transcript {
 public:
  Transcript(RecordingWriter& writer, const RecordOptions& options, RecordResult& result)
      : writer_(writer), options_(options), result_(result) {}

  bool is_full() const { return options_.limit != 0 && result_.reads + result_.writes >= options_.limit; }

  void add(const RingRecord& record) {
    if (is_full()) return;
    Access access;
    access.initiator = record.thread;
    access.op = record.kind == RecordKind::read ? AccessOp::read : AccessOp::write;
    access.size = record.size;
    access.address = record.address;
    if (!options_.free_running) {
      access.has_value = true;
      access.value = record.value;
      explain(access);
    }
    put(access);
  }

  std::uint64_t bytes_first_read() const { return bytes_.bytes_first_read(); }

 private:
  // Puts in a write before a read of something that no recorded write can have left there.
  void explain(const Access& access) {
    if (access.op == AccessOp::write) {
      bytes_.write(access.address, access.size, access.value);
      return;
    }
    if (bytes_.read(access.address, access.size, access.value) != LearnedBytes::Finding::differs) return;
    Access unseen = access;
    unseen.op = AccessOp::write;
    ++result_.added_writes;
    put(unseen);
  }

  void put(const Access& access) {
    if (is_full()) return;
    writer_.write(access);
    ++(access.op == AccessOp::read ? result_.reads : result_.writes);
  }

  RecordingWriter& writer_;
  const RecordOptions& options_;
  RecordResult& result_;
  LearnedBytes bytes_;
};

// The recorder's end of the ring.
class RingReader {
 public:
  explicit RingReader(RingHeader& ring) : ring_(ring), records_(recorder::records_of(&ring)) {}

  // Whether the record at the head is complete.
  bool has_record() const { return __atomic_load_n(&slot().stamp, __ATOMIC_ACQUIRE) == stamp(); }

  // Adds what is there, at most a quarter of the ring, and makes room for more.
  void drain_into(Transcript& transcript) {
    for (std::uint64_t n = 0; n < ring_records / 4 && has_record(); ++n) {
      transcript.add(slot());
      ++head_;
    }
    if (transcript.is_full()) __atomic_store_n(&ring_.stop, 1, __ATOMIC_RELEASE);
    __atomic_store_n(&ring_.head, head_, __ATOMIC_SEQ_CST);
    if (__atomic_exchange_n(&ring_.program_waits, 0, __ATOMIC_SEQ_CST) != 0) {
      __atomic_fetch_add(&ring_.room, 1, __ATOMIC_RELEASE);
      syscall(SYS_futex, &ring_.room, FUTEX_WAKE, static_cast<int>(recorder::most_threads), nullptr, nullptr,
              0);
    }
  }

  // After the program's end: steps over a record that was begun and not completed. False: there are no more.
  bool skip_incomplete() {
    if (head_ >= __atomic_load_n(&ring_.tail, __ATOMIC_ACQUIRE)) return false;
    ++head_;
    return true;
  }

  // Waits for the program's bell, or a little while.
  void wait() {
    const std::uint32_t seen = __atomic_load_n(&ring_.bell, __ATOMIC_ACQUIRE);
    __atomic_store_n(&ring_.recorder_sleeps, 1, __ATOMIC_SEQ_CST);
    if (!has_record()) {
      const timespec while_nothing_rings{0, 5'000'000};
      syscall(SYS_futex, &ring_.bell, FUTEX_WAIT, seen, &while_nothing_rings, nullptr, 0);
    }
    __atomic_store_n(&ring_.recorder_sleeps, 0, __ATOMIC_SEQ_CST);
  }

 private:
  const RingRecord& slot() const { return records_[head_ % ring_records]; }
  std::uint32_t stamp() const { return static_cast<std::uint32_t>(head_ / ring_records + 1); }

  RingHeader& ring_;
  const RingRecord* records_;
  std::uint64_t head_ = 0;
};

void ignore_signal(int) {}

// While it lives, an interrupt from the terminal, which the program gets, too, does not end the recorder: so
// the recording is completed when the program has ended.
class InterruptsIgnored {
 public:
  InterruptsIgnored() {
    struct sigaction action {};
    action.sa_handler = ignore_signal;  // unlike SIG_IGN, not inherited by the program
    for (std::size_t i = 0; i < count; ++i) sigaction(signals[i], &action, &before_[i]);
  }
  ~InterruptsIgnored() {
    for (std::size_t i = 0; i < count; ++i) sigaction(signals[i], &before_[i], nullptr);
  }
  InterruptsIgnored(const InterruptsIgnored&) = delete;
  InterruptsIgnored& operator=(const InterruptsIgnored&) = delete;

 private:
  static constexpr std::size_t count = 2;
  static constexpr int signals[count] = {SIGINT, SIGQUIT};
  struct sigaction before_[count];
};

std::string file_name_of(const std::string& path) {
  return path.substr(path.rfind('/') + 1);
}

// The program and its arguments, fit for the notes of a recording.
std::string command_line_of(const std::vector<std::string>& program) {
  constexpr std::size_t most = 1000;
  std::string line = file_name_of(program[0]);
  for (std::size_t i = 1; i < program.size() && line.size() < most; ++i) line += " " + program[i];
  if (line.size() > most) line = line.substr(0, most) + " ...";
  for (char& letter : line) {
    if (static_cast<unsigned char>(letter) < 0x20 || letter == 0x7f) letter = '?';
  }
  return line;
}

RecordingNotes notes_for(const RecordOptions& options) {
  RecordingNotes notes;
  notes.exact_order = !options.free_running;
  notes.text = "earshot record: " + command_line_of(options.program);
  notes.text += options.free_running
                    ? "; free running"
                    : "; one at a time, seed " + std::to_string(options.seed) + ", hand-over after " +
                          std::to_string(options.hand_over) + " accesses on average";
  if (options.limit != 0) notes.text += "; limited to " + std::to_string(options.limit) + " accesses";
  return notes;
}

// For the error when nothing arrived.
std::string end_of(const RecordResult& result) {
  if (result.signal != 0) return "ended by signal " + std::to_string(result.signal);
  return "exit status " + std::to_string(result.exit_status);
}

void refuse_nothing(const RecordOptions& options, const RingHeader& ring, const RecordResult& result) {
  if (result.reads + result.writes > 0) return;
  const std::string program = options.program[0] + " (" + end_of(result) + "): nothing was recorded; ";
  if (ring.attached == 0) {
    throw RecordError(program +
                      "the program has no recorder in it. Compile it with -fsanitize=thread and link it "
                      "with earshot_recorder instead of that option: earshot_recordable(TARGET) in CMake, or "
                      "pkg-config --variable=compile_flags and --variable=link_flags earshot-recorder");
  }
  throw RecordError(program +
                    "the recorder is in the program, but none of the code that ran has hooks. Compile the "
                    "program's own sources with -fsanitize=thread");
}

void check(const RecordOptions& options) {
  if (options.program.empty()) throw RecordError("no program was named");
  if (options.hand_over < 1 || options.hand_over > 1'000'000) {
    throw RecordError("hand-over after " + std::to_string(options.hand_over) +
                      " accesses: expected 1 to 1000000");
  }
}

std::string with_thousands(std::uint64_t number) {
  std::string digits = std::to_string(number);
  for (std::size_t at = digits.size(); at > 3; at -= 3) digits.insert(at - 3, ",");
  return digits;
}

}  // namespace

RecordResult record_program(const RecordOptions& options) {
  check(options);
  RecordResult result;
  const std::unique_ptr<RecordingWriter> writer = create_recording(options.into, notes_for(options));
  RecordedProcess process;
  RingHeader& ring = process.ring();
  ring.seed = options.seed;
  ring.free_running = options.free_running ? 1 : 0;
  ring.hand_over = options.hand_over;

  const InterruptsIgnored interrupts;
  process.start(options.program);
  Transcript transcript(*writer, options, result);
  RingReader reader(ring);
  while (!process.has_ended()) {
    reader.drain_into(transcript);
    if (!reader.has_record()) reader.wait();
  }
  do {
    while (reader.has_record()) reader.drain_into(transcript);
  } while (reader.skip_incomplete());

  result.first_read_bytes = transcript.bytes_first_read();
  result.limit_reached = transcript.is_full();
  result.threads = ring.threads_started;
  result.most_alive = ring.most_alive;
  result.hand_overs = ring.hand_overs;
  result.addresses_fixed = process.addresses_fixed();
  if (WIFSIGNALED(process.status())) result.signal = WTERMSIG(process.status());
  if (WIFEXITED(process.status())) result.exit_status = WEXITSTATUS(process.status());
  const std::string message(ring.message, strnlen(ring.message, sizeof ring.message));
  if (ring.verdict == recorder::RingVerdict::too_many_threads) {
    throw RecordError(options.program[0] + ": " + message);
  }
  if (ring.verdict == recorder::RingVerdict::deadlock) result.deadlock = message;
  refuse_nothing(options, ring, result);
  writer->finish();
  return result;
}

std::string summary_of(const RecordOptions& options, const RecordResult& result) {
  const std::string program = file_name_of(options.program[0]);
  std::string text = options.into + ": " + with_thousands(result.reads + result.writes) + " accesses (" +
                     with_thousands(result.reads) + " reads, " + with_thousands(result.writes) +
                     " writes) of " + std::to_string(result.threads) +
                     (result.threads == 1 ? " thread" : " threads");
  if (result.most_alive < result.threads) text += ", " + std::to_string(result.most_alive) + " at once";
  text += "\n";
  if (options.free_running) {
    text += "order between threads approximate, no values: threads ran freely\n";
  } else {
    text += "order and values exact; seed " + std::to_string(options.seed) + ", " +
            with_thousands(result.hand_overs) + " hand-overs\n";
    text += "learned: " + with_thousands(result.first_read_bytes) +
            " bytes held a value before the recording; " + with_thousands(result.added_writes) +
            " writes by code without hooks, put in before their first read\n";
    if (!result.addresses_fixed) {
      text += "the system would not switch off address randomisation: another run has other addresses\n";
    }
  }
  if (result.limit_reached) text += "the limit was reached: the program ran on unrecorded\n";
  if (!result.deadlock.empty()) {
    text += program + ": " + result.deadlock + "\nThe recording ends there.\n";
  } else if (result.signal != 0) {
    text += program + " was ended by signal " + std::to_string(result.signal) + " (" +
            strsignal(result.signal) + "); what it did before is recorded\n";
  } else if (result.exit_status != 0) {
    text += program + " ended with exit status " + std::to_string(result.exit_status) + "\n";
  }
  return text;
}

int exit_status_of(const RecordResult& result) {
  if (!result.deadlock.empty()) return 1;
  return result.signal != 0 ? 128 + result.signal : result.exit_status;
}

}  // namespace earshot
