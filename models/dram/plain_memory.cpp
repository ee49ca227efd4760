// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/plain_memory.h"

#include <string>

#include "earshot/dram/payload_bytes.h"
#include "earshot/version_check.h"

namespace earshot {

namespace {
constexpr std::uint64_t last_byte = ~std::uint64_t{0};
}

PlainMemory::PlainMemory(sc_core::sc_module_name name, const PlainMemoryConfig& config, HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)), config_(config) {
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
  const tlm::tlm_response_status status = payload_status(payload, last_byte);
  if (status != tlm::TLM_OK_RESPONSE) {
    payload.set_response_status(status);
    return;
  }

  const Picoseconds now = now_ps();
  const Picoseconds ready = now + to_ps(delay);
  const Picoseconds beats = (payload.get_data_length() + config_.beat_bytes - 1) / config_.beat_bytes;
  const Picoseconds service =
      to_ps(payload.is_write() ? config_.write_latency : config_.read_latency) + beats * to_ps(config_.beat_time);
  calendar_.forget_before(now);
  const Picoseconds start = calendar_.book(ready, service);
  delay = from_ps(start + service - now);
  if (auto* times = payload.get_extension<MemoryTimes>(); times != nullptr) times->queue += start - ready;

  move_payload_bytes(payload, bytes_);
  payload.set_dmi_allowed(true);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
}

tlm::tlm_sync_enum PlainMemory::nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                sc_core::sc_time& time) {
  if (phase == tlm::BEGIN_REQ) b_transport(payload, time);
  return tlm::TLM_COMPLETED;
}

unsigned PlainMemory::transport_dbg(tlm::tlm_generic_payload& payload) {
  return debug_payload(payload, bytes_, last_byte);
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
