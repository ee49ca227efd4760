// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The socket of a DramController: transport calls, phases and their misuse (IEEE 1666-2011, clauses 11.2
// and 15.2).
#include <algorithm>
#include <sstream>

#include "earshot/dram/dram_controller.h"
#include "earshot/dram/payload_bytes.h"

namespace earshot {

bool DramController::answered_at_once(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  payload.set_dmi_allowed(false);
  const tlm::tlm_response_status status = payload.get_command() == tlm::TLM_IGNORE_COMMAND
                                              ? tlm::TLM_OK_RESPONSE
                                              : payload_status(payload, last_byte_);
  if (status != tlm::TLM_OK_RESPONSE || payload.get_command() == tlm::TLM_IGNORE_COMMAND) {
    payload.set_response_status(status);
    return true;
  }
  if (!estimate_) return false;
  estimate(payload, delay);
  return true;
}

void DramController::estimate(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  const ExactClock& clock = config_.grade.clock;
  const Picoseconds now = now_ps();
  const Picoseconds arrived = now + to_ps(delay);
  const Clocks ready = clock.edge_at_or_after(arrived);
  const std::uint64_t first = payload.get_address() / config_.burst_bytes();
  const std::uint64_t last = (payload.get_address() + (payload_extent(payload) - 1)) / config_.burst_bytes();
  // A write is done when there is a place in the write queue: when no more than that many bursts are ahead of
  // it.
  const Clocks queue = Clocks{config_.write_queue} * config_.grade.burst_clocks();
  const bool write = payload.is_write();
  estimate_->forget_before(clock.edge_at_or_after(now));
  Clocks started = DramChannel::never, done = 0;
  for (std::uint64_t burst = first; burst <= last; ++burst) {
    const DramEstimate::Times times = estimate_->access(map_->place(burst), write, ready);
    const Clocks queued = std::max(ready, times.started > queue ? times.started - queue : 0);
    started = std::min(started, write ? queued : times.started);
    done = std::max(done, write ? queued : times.done);
  }
  if (write) started = done;
  if (auto* times = payload.get_extension<MemoryTimes>(); times != nullptr)
    times->queue += clock.edge(started) - arrived;
  delay = from_ps(clock.edge(done + latency()) - now);
  move_payload_bytes(payload, bytes_);
  payload.set_dmi_allowed(true);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
}

void DramController::b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  if (answered_at_once(payload, delay)) return;
  if (delay != sc_core::SC_ZERO_TIME) {
    sc_core::wait(delay);
    delay = sc_core::SC_ZERO_TIME;
  }
  const unsigned id = take(payload, true);
  arrive(id);
  enter();
  schedule();
  sc_core::wait(requests_[id]->responded);
  tell_waiting(*requests_[id]);
  forget(id);
  payload.set_dmi_allowed(true);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
}

tlm::tlm_sync_enum DramController::nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                   sc_core::sc_time& time) {
  if (phase == tlm::BEGIN_REQ) return begin_request(payload, phase, time);
  if (phase == tlm::END_RESP) return end_response(payload, time);
  if (phase == tlm::END_REQ || phase == tlm::BEGIN_RESP)
    protocol_error(payload, phase == tlm::END_REQ ? "END_REQ" : "BEGIN_RESP",
                   "BEGIN_REQ or END_RESP from an initiator");
  return tlm::TLM_ACCEPTED;  // an extended phase is none of ours
}

tlm::tlm_sync_enum DramController::begin_request(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                 sc_core::sc_time& time) {
  if (request_open_ != nobody) {
    protocol_error(payload, "BEGIN_REQ", "none before the END_REQ of the request before");
    return tlm::TLM_ACCEPTED;
  }
  const auto same = [&](const std::unique_ptr<Request>& request) { return request->payload == &payload; };
  if (std::any_of(requests_.begin(), requests_.end(), same)) {
    protocol_error(payload, "BEGIN_REQ", "END_RESP, for this payload is still in use");
    return tlm::TLM_ACCEPTED;
  }
  if (answered_at_once(payload, time)) return tlm::TLM_COMPLETED;

  if (payload.has_mm()) payload.acquire();
  const unsigned id = take(payload, false);
  request_open_ = id;
  if (time != sc_core::SC_ZERO_TIME) {
    coming_.push({now_ps() + to_ps(time), DramChannel::never, order_++, id});
    schedule();
    return tlm::TLM_ACCEPTED;
  }
  arrive(id);
  answer_inline_ = !entering_;
  enter();
  answer_inline_ = false;
  schedule();
  if (request_open_ == id) return tlm::TLM_ACCEPTED;
  phase = tlm::END_REQ;
  return tlm::TLM_UPDATED;
}

void DramController::end_request(unsigned id) {
  request_open_ = nobody;
  if (answer_inline_) return;
  tlm::tlm_phase phase = tlm::END_REQ;
  sc_core::sc_time time;
  target_socket->nb_transport_bw(*requests_[id]->payload, phase, time);
}

void DramController::send_responses() {
  if (sending_) return;
  sending_ = true;
  while (!responses_.empty() && response_open_ == nobody && response_from_ <= now_ps()) {
    const unsigned id = responses_.front();
    responses_.pop_front();
    tlm::tlm_generic_payload& payload = *requests_[id]->payload;
    tell_waiting(*requests_[id]);
    payload.set_dmi_allowed(true);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    response_open_ = id;
    tlm::tlm_phase phase = tlm::BEGIN_RESP;
    sc_core::sc_time time;
    const tlm::tlm_sync_enum answer = target_socket->nb_transport_bw(payload, phase, time);
    if (response_open_ != id) continue;  // END_RESP came in a call of its own meanwhile
    if (answer == tlm::TLM_COMPLETED || (answer == tlm::TLM_UPDATED && phase == tlm::END_RESP))
      close_response(time);
  }
  sending_ = false;
}

tlm::tlm_sync_enum DramController::end_response(tlm::tlm_generic_payload& payload,
                                                const sc_core::sc_time& time) {
  if (response_open_ == nobody || requests_[response_open_]->payload != &payload) {
    protocol_error(payload, "END_RESP",
                   response_open_ == nobody ? "no END_RESP: no BEGIN_RESP is open"
                                            : "the END_RESP of the response that is open");
    return tlm::TLM_ACCEPTED;
  }
  close_response(time);
  if (!responses_.empty()) schedule();
  return tlm::TLM_COMPLETED;
}

void DramController::close_response(const sc_core::sc_time& time) {
  tlm::tlm_generic_payload& payload = *requests_[response_open_]->payload;
  forget(response_open_);
  response_open_ = nobody;
  response_from_ = now_ps() + to_ps(time);
  if (payload.has_mm()) payload.release();
}

void DramController::protocol_error(const tlm::tlm_generic_payload& payload, const std::string& got,
                                    const std::string& expected) {
  std::ostringstream text;
  text << name() << ", called by " << initiator_name() << "\n  got " << got << " for a "
       << (payload.is_write() ? "write" : "read") << " at 0x" << std::hex << payload.get_address()
       << "; expected " << expected;
  SC_REPORT_ERROR("/earshot/dram/protocol", text.str().c_str());
}

// The first socket in the hierarchy whose calls end here.
std::string DramController::initiator_name() const {
  const tlm::tlm_fw_transport_if<>* const me = this;
  std::vector<sc_core::sc_object*> objects = sc_core::sc_get_top_level_objects();
  for (std::size_t i = 0; i < objects.size(); ++i) {
    auto* const port = dynamic_cast<sc_core::sc_port_base*>(objects[i]);
    if (port != nullptr && dynamic_cast<const tlm::tlm_fw_transport_if<>*>(port->get_interface()) == me)
      return port->name();
    const std::vector<sc_core::sc_object*>& inner = objects[i]->get_child_objects();
    objects.insert(objects.end(), inner.begin(), inner.end());
  }
  return "an unknown initiator";
}

bool DramController::get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) {
  dmi.init();
  if (payload.get_address() > last_byte_) {
    dmi.set_start_address(last_byte_ + 1);
    dmi.set_end_address(~sc_dt::uint64{0});
    return false;
  }
  const Grade& grade = config_.grade;
  const sc_core::sc_time idle =
      from_ps(grade.clock.edge(grade.trcd + grade.cl + grade.burst_clocks() + latency()));
  const std::uint64_t first = payload.get_address() / SparseBytes::page_bytes * SparseBytes::page_bytes;
  dmi.set_dmi_ptr(bytes_.page(first));
  dmi.set_start_address(first);
  dmi.set_end_address(std::min(first + (SparseBytes::page_bytes - 1), last_byte_));
  dmi.set_read_latency(idle);
  dmi.set_write_latency(from_ps(grade.clock.edge(latency())));
  dmi.allow_read_write();
  return true;
}

unsigned DramController::transport_dbg(tlm::tlm_generic_payload& payload) {
  return debug_payload(payload, bytes_, last_byte_);
}

}  // namespace earshot
