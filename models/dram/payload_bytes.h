// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What every memory here does with a generic payload apart from time: judge it, and move its bytes (IEEE
// 1666-2011, clause 14).
#pragma once

#include <algorithm>
#include <tlm>

#include "earshot/dram/sparse_bytes.h"

namespace earshot {

// The bytes that the payload touches, from its address on.
inline unsigned payload_extent(const tlm::tlm_generic_payload& payload) {
  return std::min(payload.get_data_length(), payload.get_streaming_width());
}

// The answer to a payload that reads or writes, by a memory whose last byte is at `last`: TLM_OK_RESPONSE, or
// why not.
tlm::tlm_response_status payload_status(const tlm::tlm_generic_payload& payload, std::uint64_t last);

// Reads or writes, as the payload says, with byte enables and streaming width. REQUIRES: payload_status() is
// OK.
void move_payload_bytes(tlm::tlm_generic_payload& payload, SparseBytes& bytes);

// Debug access: the number of bytes moved, 0 if any of them lies beyond `last`.
unsigned debug_payload(tlm::tlm_generic_payload& payload, SparseBytes& bytes, std::uint64_t last);

}  // namespace earshot
