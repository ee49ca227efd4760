// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A BaseProtocolObserver stands between an initiator socket and a target socket, passes every call on
// unchanged and at once, and has BaseProtocolRules judge it. Any width. Whoever holds it asks rules() at the
// end.
#pragma once

#include <functional>
#include <systemc>
#include <tlm>

#include "tlm/base_protocol_rules.h"

namespace earshot::test {

template <unsigned BUSWIDTH = 32>
class BaseProtocolObserver : public sc_core::sc_module,
                             private tlm::tlm_fw_transport_if<>,
                             private tlm::tlm_bw_transport_if<> {
 public:
  tlm::tlm_target_socket<BUSWIDTH> target_socket{"target_socket"};
  tlm::tlm_initiator_socket<BUSWIDTH> initiator_socket{"initiator_socket"};

  // `hop`: a name for messages, say the initiator's; the module's own if empty.
  explicit BaseProtocolObserver(sc_core::sc_module_name module_name, const std::string& hop = "")
      : sc_module(module_name), rules_(hop.empty() ? name() : hop) {
    target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
    initiator_socket.bind(static_cast<tlm::tlm_bw_transport_if<>&>(*this));
  }
  const char* kind() const override { return "earshot::test::BaseProtocolObserver"; }

  const BaseProtocolRules& rules() const { return rules_; }

  // If set, hears of every access: `began` at its request, else at its response.
  std::function<void(const tlm::tlm_generic_payload& payload, bool began)> on_access;

 private:
  using Instant = BaseProtocolRules::Instant;

  // Keeps a payload alive until its call has been judged.
  struct Held {
    explicit Held(tlm::tlm_generic_payload& held)
        : payload(held), counted(held.has_mm() && held.get_ref_count() > 0) {
      if (counted) payload.acquire();
    }
    ~Held() {
      if (counted) payload.release();
    }
    Held(const Held&) = delete;
    Held& operator=(const Held&) = delete;
    tlm::tlm_generic_payload& payload;
    bool counted;
  };

  static Instant instant(const sc_core::sc_time& delay) {
    return {to_ps(sc_core::sc_time_stamp()), to_ps(delay), sc_core::sc_delta_count()};
  }
  static Instant instant() { return instant(sc_core::SC_ZERO_TIME); }
  void tell(const tlm::tlm_generic_payload& payload, bool began) {
    if (on_access) on_access(payload, began);
  }

  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) override {
    tell(payload, true);
    const auto call = rules_.blocking(payload, instant(delay));
    try {
      initiator_socket->b_transport(payload, delay);
    } catch (...) {  // a report, or the caller's process was killed
      rules_.abandoned(payload);
      throw;
    }
    rules_.blocking_returns(call, payload, instant(delay));
    tell(payload, false);
  }

  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    const Held held(payload);
    const bool request = phase == tlm::BEGIN_REQ;
    if (request) tell(payload, true);
    const auto call = rules_.forward(payload, phase, instant(time));
    tlm::tlm_sync_enum status = tlm::TLM_ACCEPTED;
    try {
      status = initiator_socket->nb_transport_fw(payload, phase, time);
    } catch (...) {
      BaseProtocolRules::forward_thrown();
      throw;
    }
    rules_.forward_returns(call, payload, status, phase, instant(time));
    const bool answered =
        status == tlm::TLM_COMPLETED || (status == tlm::TLM_UPDATED && phase == tlm::BEGIN_RESP);
    if (request && answered) tell(payload, false);
    return status;
  }

  tlm::tlm_sync_enum nb_transport_bw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    const Held held(payload);
    if (phase == tlm::BEGIN_RESP) tell(payload, false);
    const auto call = rules_.backward(payload, phase, instant(time));
    tlm::tlm_sync_enum status = tlm::TLM_ACCEPTED;
    try {
      status = target_socket->nb_transport_bw(payload, phase, time);
    } catch (...) {
      BaseProtocolRules::backward_thrown();
      throw;
    }
    rules_.backward_returns(call, payload, status, phase, instant(time));
    return status;
  }

  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override {
    const auto call = rules_.direct_memory(payload, instant());
    const bool granted = initiator_socket->get_direct_mem_ptr(payload, dmi);
    rules_.direct_memory_returns(call, payload, granted, dmi, instant());
    return granted;
  }
  void invalidate_direct_mem_ptr(sc_dt::uint64 first, sc_dt::uint64 last) override {
    rules_.invalidation(first, last);
    target_socket->invalidate_direct_mem_ptr(first, last);
  }
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override {
    const auto call = rules_.debug(payload, instant());
    const unsigned count = initiator_socket->transport_dbg(payload);
    rules_.debug_returns(call, payload, count, instant());
    return count;
  }

  BaseProtocolRules rules_;
};

}  // namespace earshot::test
