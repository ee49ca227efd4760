// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/payload_bytes.h"

namespace earshot {

namespace {
bool beyond(std::uint64_t address, unsigned length, std::uint64_t last) {
  return address > last || length - 1 > last - address;
}
}  // namespace

tlm::tlm_response_status payload_status(const tlm::tlm_generic_payload& payload, std::uint64_t last) {
  if (payload.get_data_length() == 0 || payload.get_streaming_width() == 0 ||
      payload.get_data_ptr() == nullptr)
    return tlm::TLM_BURST_ERROR_RESPONSE;
  if (beyond(payload.get_address(), payload_extent(payload), last)) return tlm::TLM_ADDRESS_ERROR_RESPONSE;
  return tlm::TLM_OK_RESPONSE;
}

void move_payload_bytes(tlm::tlm_generic_payload& payload, SparseBytes& bytes) {
  const unsigned length = payload.get_data_length();
  const unsigned width = payload.get_streaming_width();
  std::uint8_t* const data = payload.get_data_ptr();
  const std::uint8_t* const enable = payload.get_byte_enable_ptr();
  const unsigned enable_length = payload.get_byte_enable_length();
  if (enable == nullptr && width >= length) {
    if (payload.is_write())
      bytes.write(payload.get_address(), data, length);
    else
      bytes.read(payload.get_address(), data, length);
    return;
  }
  for (unsigned i = 0; i < length; ++i) {
    if (enable != nullptr && enable_length != 0 && enable[i % enable_length] != TLM_BYTE_ENABLED) continue;
    const std::uint64_t address = payload.get_address() + i % width;
    if (payload.is_write())
      bytes.write(address, data + i, 1);
    else
      bytes.read(address, data + i, 1);
  }
}

unsigned debug_payload(tlm::tlm_generic_payload& payload, SparseBytes& bytes, std::uint64_t last) {
  const unsigned length = payload.get_data_length();
  if (length == 0 || beyond(payload.get_address(), length, last)) return 0;
  if (payload.is_write())
    bytes.write(payload.get_address(), payload.get_data_ptr(), length);
  else if (payload.is_read())
    bytes.read(payload.get_address(), payload.get_data_ptr(), length);
  return length;
}

}  // namespace earshot
