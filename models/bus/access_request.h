// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a TLM-2.0 payload asks of a module that stands between an initiator and a bus, before any line is looked at.
#pragma once

#include <tlm>

#include "earshot/bus/address_map.h"

namespace earshot {

enum class AccessRequest { nothing, cached, uncached, no_data, no_window };

AccessRequest request_of(const tlm::tlm_generic_payload& payload, const AddressMap& map);

// The bytes of the address space that a payload covers: its streaming width. Some initiators leave that at 0, which
// IEEE 1666-2011 (14.7) does not allow; they mean all of the data.
inline unsigned extent_of(const tlm::tlm_generic_payload& payload) {
  const unsigned width = payload.get_streaming_width(), length = payload.get_data_length();
  return width == 0 || width > length ? length : width;
}

}  // namespace earshot
