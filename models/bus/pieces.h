// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Pieces take a TLM-2.0 access apart: every repetition of the streaming width, every line, in address order, without
// the pieces that byte enables disable altogether.
#pragma once

#include <cstdint>
#include <tlm>
#include <vector>

namespace earshot {

// A piece of an access that lies in one line.
struct Piece {
  bool write = false;
  std::uint64_t line = 0;
  std::uint32_t offset = 0;
  std::uint32_t length = 0;
  std::uint8_t* data = nullptr;
  const std::uint8_t* byte_enable = nullptr;  // null, or one flag a byte; lives as long as the Pieces
};

class Pieces {
 public:
  Pieces() = default;
  // REQUIRES: there is data, and `payload` outlives this.
  Pieces(const tlm::tlm_generic_payload& payload, unsigned line_bytes);

  bool next(Piece& piece);  // false: no more
  bool last() const { return at_ >= length_; }  // after next(): nothing follows

 private:
  std::uint64_t address_ = 0;
  std::uint8_t* data_ = nullptr;
  unsigned length_ = 0;
  unsigned width_ = 0;
  unsigned line_bytes_ = 0;
  unsigned at_ = 0;
  bool write_ = false;
  std::vector<std::uint8_t> enables_;  // one a byte; empty: all enabled
};

}  // namespace earshot
