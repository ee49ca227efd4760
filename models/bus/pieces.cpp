// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/pieces.h"

#include <algorithm>

#include "earshot/bus/access_request.h"

namespace earshot {

Pieces::Pieces(const tlm::tlm_generic_payload& payload, unsigned line_bytes)
    : address_(payload.get_address()),
      data_(payload.get_data_ptr()),
      length_(payload.get_data_length()),
      width_(extent_of(payload)),
      line_bytes_(line_bytes),
      write_(payload.is_write()) {
  if (payload.get_byte_enable_ptr() == nullptr || payload.get_byte_enable_length() == 0) return;
  enables_.resize(length_);
  for (unsigned i = 0; i < length_; ++i)
    enables_[i] = payload.get_byte_enable_ptr()[i % payload.get_byte_enable_length()];
}

bool Pieces::next(Piece& piece) {
  while (at_ < length_) {
    const std::uint64_t address = address_ + at_ % width_;
    const unsigned beat_left = std::min(width_ - at_ % width_, length_ - at_);
    piece.write = write_;
    piece.line = address / line_bytes_ * line_bytes_;
    piece.offset = static_cast<std::uint32_t>(address - piece.line);
    piece.length = std::min(line_bytes_ - piece.offset, beat_left);
    piece.data = data_ + at_;
    piece.byte_enable = enables_.empty() ? nullptr : enables_.data() + at_;
    at_ += piece.length;
    if (piece.byte_enable == nullptr || std::find(piece.byte_enable, piece.byte_enable + piece.length,
                                                  TLM_BYTE_ENABLED) != piece.byte_enable + piece.length)
      return true;
  }
  return false;
}

}  // namespace earshot
