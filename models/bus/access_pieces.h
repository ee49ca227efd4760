// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An AccessPieces is one access of the bus as the accesses to a window's target that it takes, in address
// order:
//   to a cached window, its runs of enabled bytes, without byte enables, which many a memory ignores;
//   to an uncached window, the access as it is;
//   either, where longer than Window::max_burst, cut at the multiples of that, in the target's addresses. A
//   piece does not stream: a streaming access that is cut returns to its address piece by piece.
// It also keeps what the access said: a target may overwrite the address (IEEE 1666-2011, 14.10), and some
// overwrite more, so nothing of that is read back after a call. Needs no simulation.
#pragma once

#include <array>
#include <cstdint>
#include <tlm>

#include "earshot/bus/address_map.h"

namespace earshot {

class AccessPieces {
 public:
  // REQUIRES: the access lies in the window; the window and what the payload points to outlive this.
  void start(const Window& window, const tlm::tlm_generic_payload& whole);

  // One access, which is the caller's.
  bool as_it_is() const { return as_it_is_; }
  // None is left. So at once if no byte is enabled.
  bool done() const { return at_ == length_; }
  // Makes the payload the next one, with its address at the target, not answered yet. REQUIRES: !done().
  void next(tlm::tlm_generic_payload& piece);
  // Of the last next(); the address is the target's.
  bool is_write() const { return command_ == tlm::TLM_WRITE_COMMAND; }
  std::uint64_t address() const { return piece_address_; }
  unsigned length() const { return piece_length_; }

  // The payload says again what it said at start(); its answer stays.
  void restore(tlm::tlm_generic_payload& payload) const;

 private:
  bool enabled(unsigned byte) const { return enable_[byte % enable_length_] == TLM_BYTE_ENABLED; }
  void skip_disabled();

  const Window* window_ = nullptr;
  tlm::tlm_command command_ = tlm::TLM_IGNORE_COMMAND;
  std::uint64_t address_ = 0;
  std::uint8_t* data_ = nullptr;
  unsigned length_ = 0, width_ = 0, extent_ = 0;
  std::uint8_t* enable_ = nullptr;
  unsigned enable_length_ = 0;

  bool as_it_is_ = true;
  bool in_runs_ = false;
  unsigned limit_ = 0;  // bytes of a piece; 0: as many as there are
  unsigned at_ = 0;     // where the next piece begins
  std::uint64_t piece_address_ = 0;
  unsigned piece_length_ = 0;
  std::array<std::uint8_t, 256> piece_enable_;
};

}  // namespace earshot
