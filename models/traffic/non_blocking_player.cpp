// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#define SC_INCLUDE_DYNAMIC_PROCESSES
#include "earshot/traffic/non_blocking_player.h"

#include <algorithm>

#include "earshot/version_check.h"

namespace earshot {

NonBlockingPlayer::NonBlockingPlayer(sc_core::sc_module_name name, std::uint32_t initiator,
                                     unsigned outstanding, ThinkTime think, PlayerHooks hooks,
                                     HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)),
      initiator_(initiator),
      outstanding_(outstanding),
      think_(think),
      hooks_(std::move(hooks)) {
  initiator_socket.register_nb_transport_bw(this, &NonBlockingPlayer::backward);
  sc_core::sc_spawn([this] { play(); }, "play");
  sc_core::sc_spawn_options options;
  options.spawn_method();
  options.set_sensitivity(&agenda_.due());
  options.dont_initialize();
  sc_core::sc_spawn([this] { agenda_.run(); }, "phases", &options);
}

void NonBlockingPlayer::play() {
  if (source_ == nullptr) return;
  try {
    for (Access access; source_->next(access);) {
      while (in_flight_.size() == outstanding_ || requesting_ != nullptr) wait(changed_);
      if (access.op == AccessOp::replace) {
        ++issued_;
        if (hooks_.replace) hooks_.replace(initiator_, access.address, sc_core::SC_ZERO_TIME);
        if (hooks_.done) hooks_.done();
        continue;
      }
      if (const sc_core::sc_time think = think_.next(); think != sc_core::SC_ZERO_TIME) wait(think);
      issue(access);
    }
  } catch (const sc_core::sc_report&) {
    throw;
  } catch (const std::exception&) {
    stop(std::current_exception());
    return;
  }
  while (!in_flight_.empty()) wait(changed_);
  if (end_.error != nullptr) return;
  end_.at = sc_core::sc_time_stamp();
  end_.finished = true;
  if (hooks_.finished) hooks_.finished();
}

void NonBlockingPlayer::issue(const Access& access) {
  Flight& flight = new_flight();
  flight.access = access;
  flight.number = ++issued_;
  make_payload(access, flight.number, flight.bytes.data(), flight);
  in_flight_.push_back(&flight);
  requesting_ = &flight;
  tlm::tlm_phase phase = tlm::BEGIN_REQ;
  sc_core::sc_time time;
  const tlm::tlm_sync_enum answer = initiator_socket->nb_transport_fw(flight, phase, time);
  if (answer == tlm::TLM_ACCEPTED) return;
  const Picoseconds when = now_ps() + to_ps(time);
  if (answer == tlm::TLM_COMPLETED)
    agenda_.at<&NonBlockingPlayer::answered>(when, this, &flight);
  else if (phase == tlm::END_REQ)
    agenda_.at<&NonBlockingPlayer::request_ended>(when, this, &flight);
  else
    agenda_.at<&NonBlockingPlayer::answered_inline>(when, this, &flight);
}

NonBlockingPlayer::Flight& NonBlockingPlayer::new_flight() {
  if (unused_.empty()) {
    flights_.push_back(std::make_unique<Flight>(static_cast<tlm::tlm_mm_interface*>(this)));
    unused_.push_back(flights_.back().get());
  }
  Flight& flight = *unused_.back();
  unused_.pop_back();
  flight.acquire();
  return flight;
}

void NonBlockingPlayer::free(tlm::tlm_generic_payload* payload) {
  payload->reset();
  unused_.push_back(static_cast<Flight*>(payload));
}

tlm::tlm_sync_enum NonBlockingPlayer::backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                               sc_core::sc_time& time) {
  Flight* const flight = static_cast<Flight*>(&payload);
  const bool later = time != sc_core::SC_ZERO_TIME;
  const Picoseconds when = now_ps() + to_ps(time);
  if (phase == tlm::END_REQ) {
    if (later)
      agenda_.at<&NonBlockingPlayer::request_ended>(when, this, flight);
    else
      request_ended(flight);
    return tlm::TLM_ACCEPTED;
  }
  if (phase != tlm::BEGIN_RESP) return tlm::TLM_ACCEPTED;  // an extended phase is none of ours
  if (later)
    agenda_.at<&NonBlockingPlayer::answered>(when, this, flight);
  else
    answered(flight);
  return tlm::TLM_COMPLETED;
}

void NonBlockingPlayer::request_ended(Flight* flight) {
  if (requesting_ != flight) return;
  requesting_ = nullptr;
  changed_.notify();
}

// BEGIN_RESP came on the return path: END_RESP has to be sent.
void NonBlockingPlayer::answered_inline(Flight* flight) {
  tlm::tlm_phase phase = tlm::END_RESP;
  sc_core::sc_time time;
  initiator_socket->nb_transport_fw(*flight, phase, time);
  answered(flight);
}

void NonBlockingPlayer::answered(Flight* flight) {
  request_ended(flight);  // implied by BEGIN_RESP
  in_flight_.erase(std::find(in_flight_.begin(), in_flight_.end(), flight));
  changed_.notify();
  if (flight->is_response_error() && end_.error == nullptr)
    stop(std::make_exception_ptr(refusal(flight->access, flight->number, *flight)));
  flight->release();
  if (hooks_.done) hooks_.done();
}

void NonBlockingPlayer::stop(std::exception_ptr error) {
  end_.error = error;
  if (hooks_.failed) hooks_.failed();
}

std::string NonBlockingPlayer::waiting() const {
  std::string text;
  for (const Flight* flight : in_flight_) text += (text.empty() ? "" : "\n") + text_of(flight->access);
  return text;
}

}  // namespace earshot
