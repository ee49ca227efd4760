// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A WidthAdapter binds sockets of different BUSWIDTH. TLM-2.0 lets only sockets of equal width be bound, but the width is
// no property of a transaction (IEEE 1666-2011, 13.4): every call is passed on as it is, at once, in both directions.
// Earshot's sockets are 32 bits wide. For an initiator of 64: WidthAdapter<64, 32> wide("wide");
// cpu.socket.bind(wide.target_socket); wide.initiator_socket.bind(cache.cpu_socket).
#pragma once

#include <systemc>
#include <tlm>

namespace earshot {

template <unsigned From, unsigned To>
class WidthAdapter : public sc_core::sc_module,
                     private tlm::tlm_fw_transport_if<>,
                     private tlm::tlm_bw_transport_if<> {
 public:
  tlm::tlm_target_socket<From> target_socket{"target_socket"};
  tlm::tlm_initiator_socket<To> initiator_socket{"initiator_socket"};

  explicit WidthAdapter(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
    initiator_socket.bind(static_cast<tlm::tlm_bw_transport_if<>&>(*this));
  }
  const char* kind() const override { return "earshot::WidthAdapter"; }

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) override {
    initiator_socket->b_transport(payload, delay);
  }
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    return initiator_socket->nb_transport_fw(payload, phase, time);
  }
  tlm::tlm_sync_enum nb_transport_bw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    return target_socket->nb_transport_bw(payload, phase, time);
  }
  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override {
    return initiator_socket->get_direct_mem_ptr(payload, dmi);
  }
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override { return initiator_socket->transport_dbg(payload); }
  void invalidate_direct_mem_ptr(sc_dt::uint64 first, sc_dt::uint64 last) override {
    target_socket->invalidate_direct_mem_ptr(first, last);
  }
};

}  // namespace earshot
