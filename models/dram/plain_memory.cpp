// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/plain_memory.h"

#include <algorithm>
#include <string>

namespace earshot {

PlainMemory::PlainMemory(sc_core::sc_module_name name, const PlainMemoryConfig& config)
    : sc_module(name), config_(config) {
  const unsigned beat = config.beat_bytes;
  if (beat < 1 || beat > 256 || (beat & (beat - 1)) != 0)
    SC_REPORT_ERROR("/earshot/dram/config", (std::string(this->name()) + "\n  beat: " + std::to_string(beat) +
                                             " bytes; expected a power of two from 1 to 256")
                                                .c_str());
  target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
}

void PlainMemory::b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  payload.set_dmi_allowed(false);
  if (payload.get_command() == tlm::TLM_IGNORE_COMMAND) {
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    return;
  }
  const unsigned length = payload.get_data_length();
  if (length == 0 || payload.get_streaming_width() == 0 || payload.get_data_ptr() == nullptr) {
    payload.set_response_status(tlm::TLM_BURST_ERROR_RESPONSE);
    return;
  }
  const unsigned extent = std::min(length, payload.get_streaming_width());
  if (payload.get_address() + (extent - 1) < payload.get_address()) {
    payload.set_response_status(tlm::TLM_ADDRESS_ERROR_RESPONSE);
    return;
  }

  const Picoseconds now = now_ps();
  const Picoseconds ready = now + to_ps(delay);
  const Picoseconds beats = (length + config_.beat_bytes - 1) / config_.beat_bytes;
  const Picoseconds service =
      to_ps(payload.is_write() ? config_.write_latency : config_.read_latency) + beats * to_ps(config_.beat_time);
  calendar_.forget_before(now);
  const Picoseconds start = calendar_.book(ready, service);
  delay = from_ps(start + service - now);
  if (auto* times = payload.get_extension<MemoryTimes>(); times != nullptr) times->queue += start - ready;

  move_bytes(payload);
  payload.set_dmi_allowed(true);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
}

void PlainMemory::move_bytes(tlm::tlm_generic_payload& payload) {
  const unsigned length = payload.get_data_length();
  const unsigned width = payload.get_streaming_width();
  std::uint8_t* const data = payload.get_data_ptr();
  const std::uint8_t* const enable = payload.get_byte_enable_ptr();
  const unsigned enable_length = payload.get_byte_enable_length();
  if (enable == nullptr && width >= length) {
    if (payload.is_write())
      bytes_.write(payload.get_address(), data, length);
    else
      bytes_.read(payload.get_address(), data, length);
    return;
  }
  for (unsigned i = 0; i < length; ++i) {
    if (enable != nullptr && enable_length != 0 && enable[i % enable_length] != TLM_BYTE_ENABLED) continue;
    const std::uint64_t address = payload.get_address() + i % width;
    if (payload.is_write())
      bytes_.write(address, data + i, 1);
    else
      bytes_.read(address, data + i, 1);
  }
}

tlm::tlm_sync_enum PlainMemory::nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                sc_core::sc_time& time) {
  if (phase == tlm::BEGIN_REQ) b_transport(payload, time);
  return tlm::TLM_COMPLETED;
}

unsigned PlainMemory::transport_dbg(tlm::tlm_generic_payload& payload) {
  const unsigned length = payload.get_data_length();
  if (length == 0 || payload.get_address() + (length - 1) < payload.get_address()) return 0;
  if (payload.is_write())
    bytes_.write(payload.get_address(), payload.get_data_ptr(), length);
  else if (payload.is_read())
    bytes_.read(payload.get_address(), payload.get_data_ptr(), length);
  return length;
}

bool PlainMemory::get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) {
  const std::uint64_t first = payload.get_address() / SparseBytes::page_bytes * SparseBytes::page_bytes;
  dmi.init();
  dmi.set_dmi_ptr(bytes_.page(first));
  dmi.set_start_address(first);
  dmi.set_end_address(first + (SparseBytes::page_bytes - 1));
  dmi.set_read_latency(config_.read_latency);
  dmi.set_write_latency(config_.write_latency);
  dmi.allow_read_write();
  return true;
}

}  // namespace earshot
