// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Recording is the sequence of memory accesses a program made: who, what, where, how many bytes, which
// value. It is read as a stream: memory use does not grow with its length. Pure C++; one reader or writer
// belongs to one thread at a time.
#pragma once

#include <cstdint>
#include <memory>
#include <stdexcept>
#include <string>

namespace earshot {

enum class AccessOp : std::uint8_t {
  read,
  write,
  replace,  // the initiator's cache gives the line up as a replacement would
};
const char* name_of(AccessOp op);

constexpr std::uint32_t largest_access = 4096;  // bytes
constexpr std::uint32_t most_initiators = 64;

// One access to the bytes [address, address + size), which end within 64 bits. `value` is the number whose
// little-endian bytes are those read or written; it counts only if has_value, which needs a size of 8 or
// less, and is below 2^(8 * size).
struct Access {
  std::uint32_t initiator = 0;
  AccessOp op = AccessOp::read;
  bool has_value = false;
  std::uint32_t size = 0;  // bytes, 1 to largest_access
  std::uint64_t address = 0;
  std::uint64_t value = 0;

  bool operator==(const Access& other) const {
    return initiator == other.initiator && op == other.op && has_value == other.has_value &&
           size == other.size && address == other.address && (!has_value || value == other.value);
  }
};

// What a recording says about itself. The text form carries it in '#' lines, the binary form in its header.
struct RecordingNotes {
  bool exact_order = true;  // false: recorded free running, the order between initiators is approximate
  std::string text;  // free text for a person: which program, when, seed; may be empty. At most 32 KiB,
                     // no control characters but newline and tab
};

// Anything wrong with a recording: "FILE:LINE: what, what was expected" (text) or "FILE: at byte N: ..."
// (binary).
class RecordingError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// A source of accesses: a file, or a synthetic pattern.
class AccessSource {
 public:
  virtual ~AccessSource() = default;
  // Stores the next access in `access` and returns true, or returns false at the end.
  // Throws RecordingError; the source is then at its end.
  virtual bool next(Access& access) = 0;
};

class RecordingReader : public AccessSource {
 public:
  virtual const RecordingNotes& notes() const = 0;
  // Bit i: what has been read so far has accesses of initiator i, also if only another's are yielded. At the end of
  // the recording that is all of them.
  virtual std::uint64_t initiators_seen() const = 0;
};

constexpr std::uint32_t every_initiator = ~std::uint32_t{0};

// Opens a recording in either form, with or without gzip or zstd on top: recognised by content, not by name.
// With `only` set, yields that initiator's accesses alone, in order. Throws RecordingError.
std::unique_ptr<RecordingReader> open_recording(const std::string& path,
                                                std::uint32_t only = every_initiator);

class RecordingWriter {
 public:
  virtual ~RecordingWriter() = default;
  // Throws RecordingError if the access breaks a rule of Access (it is then left out and the writer stays
  // good) or the file system refuses (the writer is then good for nothing but destruction).
  virtual void write(const Access& access) = 0;
  // Completes the file and gives it its name. Without it the destructor leaves nothing behind.
  virtual void finish() = 0;
};

// Creates a recording. The form follows the name: .csv is text, anything else binary; a final .gz or .zst
// compresses it. Writes to a temporary beside `path`, renamed by finish(). Throws RecordingError.
std::unique_ptr<RecordingWriter> create_recording(const std::string& path, const RecordingNotes& notes);

// Copies a recording, notes included, into the form that the name `to` asks for (see create_recording).
// Returns the number of accesses. Throws RecordingError; a file that had the name `to` before is then
// untouched. `from` and `to` may not be the same file.
std::uint64_t convert_recording(const std::string& from, const std::string& to);

}  // namespace earshot
