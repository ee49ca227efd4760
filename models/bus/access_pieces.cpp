// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/access_pieces.h"

#include <algorithm>

#include "earshot/bus/access_request.h"

namespace earshot {

void AccessPieces::start(const Window& window, const tlm::tlm_generic_payload& whole) {
  window_ = &window;
  command_ = whole.get_command();
  address_ = whole.get_address();
  data_ = whole.get_data_ptr();
  length_ = whole.get_data_length();
  width_ = whole.get_streaming_width();
  extent_ = extent_of(whole);
  enable_ = whole.get_byte_enable_ptr();
  enable_length_ = whole.get_byte_enable_length();

  limit_ = std::min(window.max_burst, static_cast<unsigned>(piece_enable_.size()));
  if (length_ <= limit_) limit_ = 0;
  in_runs_ = window.cached && enable_ != nullptr && enable_length_ > 0;
  as_it_is_ = limit_ == 0 && !in_runs_;
  at_ = 0;
  skip_disabled();
}

void AccessPieces::skip_disabled() {
  while (in_runs_ && at_ < length_ && !enabled(at_)) ++at_;
}

void AccessPieces::next(tlm::tlm_generic_payload& piece) {
  restore(piece);
  piece.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  if (width_ == 0) piece.set_streaming_width(length_);
  const unsigned first = at_;
  unsigned size = length_ - first;
  piece_address_ = address_ - window_->base + window_->target_base;
  if (!as_it_is_) {
    size = std::min(size, extent_ - first % extent_);
    piece_address_ += first % extent_;
    if (in_runs_) {
      unsigned run = 1;
      while (run < size && enabled(first + run)) ++run;
      size = run;
    }
    if (limit_ != 0 && size > limit_) size = limit_ - static_cast<unsigned>(piece_address_ % limit_);
    piece.set_data_ptr(data_ + first);
    piece.set_data_length(size);
    piece.set_streaming_width(size);
    if (in_runs_) {
      piece.set_byte_enable_ptr(nullptr);
      piece.set_byte_enable_length(0);
    } else if (enable_ != nullptr && enable_length_ > 0) {
      for (unsigned i = 0; i < size; ++i) piece_enable_[i] = enable_[(first + i) % enable_length_];
      piece.set_byte_enable_ptr(piece_enable_.data());
      piece.set_byte_enable_length(size);
    }
  }
  piece.set_address(piece_address_);
  piece_length_ = size;
  at_ = first + size;
  skip_disabled();
}

void AccessPieces::restore(tlm::tlm_generic_payload& payload) const {
  payload.set_command(command_);
  payload.set_address(address_);
  payload.set_data_ptr(data_);
  payload.set_data_length(length_);
  payload.set_streaming_width(width_);
  payload.set_byte_enable_ptr(enable_);
  payload.set_byte_enable_length(enable_length_);
}

}  // namespace earshot
