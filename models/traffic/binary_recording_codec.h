// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// One block of the binary form: up to block_accesses accesses, split by initiator, each part decodable
// without the others and without other blocks. A block is a head (what the parts are, and the order between
// them) and the parts. README.md of this room describes the bytes. Pure: no files.
#pragma once

#include <array>
#include <cstddef>
#include <cstdint>
#include <stdexcept>
#include <vector>

#include "earshot/traffic/recording.h"

namespace earshot {

constexpr std::uint32_t block_accesses = 64 * 1024;
constexpr std::uint32_t most_head_bytes = 256 * 1024;        // more than block_accesses accesses can need
constexpr std::uint32_t most_parts_bytes = 2 * 1024 * 1024;  // likewise

std::uint32_t crc_of(const unsigned char* bytes, std::size_t count);  // CRC-32 as in zlib and RFC 1952

// What both ends remember of one initiator within a block, all zero at its beginning.
struct StreamContext {
  static constexpr std::size_t cursors = 16;
  static constexpr std::size_t value_slots = 1024;

  static std::size_t slot_of(std::uint64_t address) {
    return static_cast<std::size_t>((address * 0x9e3779b97f4a7c15u) >>
                                    54);  // multiplicative hash, 2^64 / golden ratio
  }

  std::array<std::uint64_t, cursors> cursor{};     // an address each, from which the next is a short step
  std::array<std::uint64_t, value_slots> value{};  // the value last seen at an address with that slot
};

class BlockEncoder {
 public:
  // REQUIRES: the access keeps the rules of recording.h, and count() < block_accesses.
  void add(const Access& access);
  std::uint32_t count() const { return count_; }

  // Appends the block to `head` and `parts` and forgets the accesses.
  void encode(std::vector<unsigned char>& head, std::vector<unsigned char>& parts);

 private:
  struct Stream {
    explicit Stream(std::uint32_t of) : initiator(of) {}
    void add(const Access& access);
    void add_address(std::uint64_t address);
    unsigned add_value(const Access& access);

    std::uint32_t initiator;
    std::uint32_t count = 0;
    std::vector<unsigned char> ops, addresses, values;
    StreamContext context;
    std::array<std::uint64_t, StreamContext::cursors> last_use{};  // serial number of the access, per cursor
  };
  // Consecutive accesses of one stream.
  struct Run {
    std::uint32_t stream;
    std::uint32_t length;
  };

  std::vector<Stream> streams_;  // in order of their first access
  std::vector<Run> order_;
  std::uint32_t count_ = 0;
};

// A block that no BlockEncoder makes.
class BlockError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

class BlockDecoder {
 public:
  static constexpr std::size_t slack = 32;

  struct Bytes {
    const unsigned char* at = nullptr;
    const unsigned char* end = nullptr;
    std::size_t size() const { return static_cast<std::size_t>(end - at); }
  };

  // Takes up a block. Both ranges must stay until the last decode(); the `slack` bytes behind each must be
  // readable. With `only` set, checks and decodes that initiator's part alone. Throws BlockError.
  void open(Bytes head, Bytes parts, std::uint32_t only);

  // Bit i: the block has accesses of initiator i, whatever `only` is.
  std::uint64_t initiators() const { return initiators_; }
  // Accesses in the block, whatever `only` is.
  std::uint32_t count() const { return count_; }

  // Stores up to `most` accesses and returns how many; 0 at the end of the block. Throws BlockError.
  std::size_t decode(Access* into, std::size_t most);

 private:
  struct Stream {
    std::uint32_t initiator = 0;
    std::uint32_t left = 0;
    Bytes ops, addresses, values;
    StreamContext context;
  };
  void open_streams(Bytes& head, Bytes parts, std::uint32_t only);
  void begin_run();
  void check_ends() const;
  static void decode_run(Stream& stream, Access* into, std::size_t count);

  std::vector<Stream> streams_;  // kept from block to block; the first stream_count_ belong to this one
  std::size_t stream_count_ = 0;
  unsigned stream_bits_ = 0;  // of a run's code: enough to tell the streams apart
  Bytes order_;
  Stream* run_stream_ = nullptr;
  std::uint32_t run_left_ = 0;
  std::uint32_t left_ = 0;  // to decode from this block
  std::uint32_t count_ = 0;
  bool only_one_ = false;
  std::uint64_t initiators_ = 0;
};

}  // namespace earshot
