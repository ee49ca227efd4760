// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/playing.h"

#include <cstring>
#include <sstream>

namespace earshot {
namespace {

void invent(std::uint32_t initiator, std::uint64_t number, std::uint8_t* bytes, std::size_t length) {
  for (std::size_t i = 0; i < length; ++i) {
    const std::uint64_t mixed = (number * 0x9E3779B97F4A7C15u) ^ (initiator * 0xD1B54A32D192ED03u) ^ (i / 8);
    bytes[i] = static_cast<std::uint8_t>((mixed * 0xBF58476D1CE4E5B9u) >> (i % 8 * 8));
  }
}

}  // namespace

std::string text_of(const Access& access) {
  std::ostringstream out;
  out << "initiator " << access.initiator << ", " << name_of(access.op) << " of " << access.size
      << " bytes at 0x" << std::hex << access.address;
  return out.str();
}

void make_payload(const Access& access, std::uint64_t number, std::uint8_t* bytes,
                  tlm::tlm_generic_payload& payload) {
  const bool write = access.op == AccessOp::write;
  if (write && access.has_value)
    std::memcpy(bytes, &access.value, sizeof access.value);  // a fixed size is quicker than access.size
  else if (write)
    invent(access.initiator, number, bytes, access.size);
  payload.set_command(write ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND);
  payload.set_address(access.address);
  payload.set_data_ptr(bytes);
  payload.set_data_length(access.size);
  payload.set_streaming_width(access.size);
  payload.set_byte_enable_ptr(nullptr);
  payload.set_dmi_allowed(false);
  payload.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
}

PlayError refusal(const Access& access, std::uint64_t number, const tlm::tlm_generic_payload& payload) {
  return PlayError("access " + std::to_string(number) + " of its initiator (" + text_of(access) +
                   ") was answered with " + payload.get_response_string());
}

}  // namespace earshot
