// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The memory that `earshot record` shares with the program it records: a header with what the recorder asks
// and what the program answers, then a ring of fixed-size records that the program fills and the recorder
// empties. Shared memory rather than a pipe because nothing in it is lost however the program ends, and
// because a full ring is all the back-pressure there is: memory use does not grow with the length of the run.
//
// Plain data only: the program's side is compiled without the C++ library. Both sides come from one build,
// which `version` makes sure of.
#pragma once

#include <cstddef>
#include <cstdint>

namespace earshot::recorder {

constexpr std::uint32_t ring_magic = 0x52524145;  // "EARR", read as little-endian bytes
constexpr std::uint32_t ring_version = 1;         // one more with every change to this file
constexpr std::uint64_t ring_records = 1u << 17;  // a power of two
constexpr std::uint32_t most_threads = 64;        // alive at once; a recording holds no more initiators

// Names the file descriptor of the shared memory to the program. The program forgets both as it starts.
constexpr const char* ring_variable = "EARSHOT_RECORD";

enum class RecordKind : std::uint8_t { read, write };

// One access of 1 to 8 bytes. The slot of the record at position p is p % ring_records; the record is
// complete once its stamp is p / ring_records + 1.
struct RingRecord {
  std::uint64_t address;
  std::uint64_t value;  // counts only one at a time
  std::uint32_t stamp;
  std::uint16_t size;
  std::uint8_t thread;
  RecordKind kind;
};
static_assert(sizeof(RingRecord) == 24);

// How the program's side ended its own run, if it did.
enum class RingVerdict : std::uint32_t {
  none,
  deadlock,          // every thread waits for another
  too_many_threads,  // more than most_threads at once
};

struct RingHeader {
  std::uint32_t magic;
  std::uint32_t version;

  // What the recorder asks; constant once the program runs, but for `stop`.
  std::uint32_t free_running;
  std::uint32_t hand_over;  // mean accesses between two hand-overs
  std::uint64_t seed;
  std::int32_t recorder_process;
  std::uint32_t stop;  // set when the recorder wants no more records

  // What the program answers.
  std::uint32_t attached;  // its process id, 0 before it has found this memory
  RingVerdict verdict;
  std::uint32_t threads_started;  // the main thread included
  std::uint32_t most_alive;
  std::uint64_t hand_overs;
  char message[4096];  // the verdict in words

  // The ring: positions count up for ever. Each of the two on a cache line of its own.
  alignas(64) std::uint64_t tail;  // the next position to fill
  std::uint32_t recorder_sleeps;   // the recorder waits on `bell`
  std::uint32_t bell;              // futex
  alignas(64) std::uint64_t head;  // the next position to empty
  std::uint32_t program_waits;     // somebody waits on `room` because the ring is full
  std::uint32_t room;              // futex
};
constexpr std::size_t ring_offset = 8192;
static_assert(sizeof(RingHeader) <= ring_offset);
constexpr std::size_t ring_bytes = ring_offset + ring_records * sizeof(RingRecord);

inline RingRecord* records_of(RingHeader* header) {
  return reinterpret_cast<RingRecord*>(reinterpret_cast<char*>(header) + ring_offset);
}

}  // namespace earshot::recorder
