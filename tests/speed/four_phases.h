// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a transaction of arbitrated timing is measured against: two modules that exchange the four phases of the base
// protocol through the standard payload event queues, and nothing else; the queues emptied by processes that wait for
// them, or, leaner, by callbacks. And an initiator without processes, which sends its next access when the last one is
// answered.
#pragma once

#include <systemc>
#include <tlm>
#include <tlm_utils/peq_with_cb_and_phase.h>
#include <tlm_utils/peq_with_get.h>
#include <tlm_utils/simple_initiator_socket.h>
#include <tlm_utils/simple_target_socket.h>
#include <vector>

namespace earshot {

// A payload whose owner outlives every use of it.
struct KeptPayload : tlm::tlm_generic_payload, private tlm::tlm_mm_interface {
  KeptPayload() {
    set_mm(this);
    acquire();
    set_data_ptr(data);
    set_data_length(4);
    set_streaming_width(4);
  }
  void prepare(tlm::tlm_command command, std::uint64_t address) {
    set_command(command);
    set_address(address);
    set_dmi_allowed(false);
    set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  }
  alignas(8) unsigned char data[8] = {};

 private:
  void free(tlm::tlm_generic_payload*) override {}
};

class WaitingTarget : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<WaitingTarget> target_socket{"target_socket"};
  explicit WaitingTarget(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.register_nb_transport_fw(this, &WaitingTarget::forward);
    SC_HAS_PROCESS(WaitingTarget);
    SC_THREAD(accept);
    SC_THREAD(answer);
  }

 private:
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    if (phase == tlm::END_RESP) return tlm::TLM_COMPLETED;
    requests_.notify(payload, time);
    return tlm::TLM_ACCEPTED;
  }
  void accept() {
    for (;;) {
      wait(requests_.get_event());
      while (tlm::tlm_generic_payload* const payload = requests_.get_next_transaction()) {
        send(*payload, tlm::END_REQ);
        responses_.notify(*payload, sc_core::sc_time(10, sc_core::SC_NS));
      }
    }
  }
  void answer() {
    for (;;) {
      wait(responses_.get_event());
      while (tlm::tlm_generic_payload* const payload = responses_.get_next_transaction()) {
        payload->set_response_status(tlm::TLM_OK_RESPONSE);
        send(*payload, tlm::BEGIN_RESP);
      }
    }
  }
  void send(tlm::tlm_generic_payload& payload, tlm::tlm_phase phase) {
    sc_core::sc_time time;
    target_socket->nb_transport_bw(payload, phase, time);
  }
  tlm_utils::peq_with_get<tlm::tlm_generic_payload> requests_{"requests"}, responses_{"responses"};
};

class WaitingInitiator : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<WaitingInitiator> socket{"socket"};
  explicit WaitingInitiator(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &WaitingInitiator::backward);
    SC_HAS_PROCESS(WaitingInitiator);
    SC_THREAD(work);
  }
  void run(std::uint64_t count) {
    left_ = count;
    begin_.notify(sc_core::SC_ZERO_TIME);
    sc_core::sc_start();
  }

 private:
  void work() {
    for (;;) {
      wait(begin_);
      for (; left_ > 0; --left_) {
        payload_.prepare(tlm::TLM_READ_COMMAND, 0);
        send(tlm::BEGIN_REQ, 1);
        wait(request_ended_);
        wait(responses_.get_event());
        while (responses_.get_next_transaction() != nullptr) send(tlm::END_RESP, 0);
      }
    }
  }
  void send(tlm::tlm_phase phase, int ns) {
    sc_core::sc_time time(ns, sc_core::SC_NS);
    socket->nb_transport_fw(payload_, phase, time);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    if (phase == tlm::BEGIN_RESP)
      responses_.notify(payload, time + sc_core::sc_time(1, sc_core::SC_NS));
    else
      request_ended_.notify();
    return tlm::TLM_ACCEPTED;
  }
  KeptPayload payload_;
  std::uint64_t left_ = 0;
  sc_core::sc_event begin_, request_ended_;
  tlm_utils::peq_with_get<tlm::tlm_generic_payload> responses_{"responses"};
};

class BareTarget : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<BareTarget> target_socket{"target_socket"};
  explicit BareTarget(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.register_nb_transport_fw(this, &BareTarget::forward);
  }

 private:
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    queue_.notify(payload, phase, time);
    return tlm::TLM_ACCEPTED;
  }
  void work(tlm::tlm_generic_payload& payload, const tlm::tlm_phase& phase) {
    if (phase != tlm::BEGIN_REQ) return;  // END_RESP
    send(payload, tlm::END_REQ, 1);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    send(payload, tlm::BEGIN_RESP, 10);
  }
  void send(tlm::tlm_generic_payload& payload, tlm::tlm_phase phase, int ns) {
    sc_core::sc_time time(ns, sc_core::SC_NS);
    target_socket->nb_transport_bw(payload, phase, time);
  }
  tlm_utils::peq_with_cb_and_phase<BareTarget> queue_{this, &BareTarget::work};
};

class BareInitiator : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<BareInitiator> socket{"socket"};
  explicit BareInitiator(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &BareInitiator::backward);
  }
  void run(std::uint64_t count) {
    left_ = count;
    issue();
    sc_core::sc_start();
  }

 private:
  void issue() {
    if (left_-- == 0) return;
    payload_.prepare(tlm::TLM_READ_COMMAND, 0);
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    sc_core::sc_time time(1, sc_core::SC_NS);
    socket->nb_transport_fw(payload_, phase, time);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    queue_.notify(payload, phase, time);
    return tlm::TLM_ACCEPTED;
  }
  void work(tlm::tlm_generic_payload& payload, const tlm::tlm_phase& phase) {
    if (phase != tlm::BEGIN_RESP) return;
    tlm::tlm_phase end = tlm::END_RESP;
    sc_core::sc_time time(1, sc_core::SC_NS);
    socket->nb_transport_fw(payload, end, time);
    issue();
  }
  KeptPayload payload_;
  std::uint64_t left_ = 0;
  tlm_utils::peq_with_cb_and_phase<BareInitiator> queue_{this, &BareInitiator::work};
};

// Walks over memory line by line.
class Walker : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Walker> socket{"socket"};
  explicit Walker(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &Walker::backward);
  }
  void run(std::uint64_t count) {
    left_ = count;
    issue();
    sc_core::sc_start();
  }

 private:
  void issue() {
    if (left_-- == 0) return;
    KeptPayload& payload = payloads_[left_ % 2];  // the other one is still being answered
    payload.prepare(tlm::TLM_READ_COMMAND, (address_ += 32) % 0x100000);
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    sc_core::sc_time time;
    socket->nb_transport_fw(payload, phase, time);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload&, tlm::tlm_phase& phase, sc_core::sc_time&) {
    if (phase != tlm::BEGIN_RESP) return tlm::TLM_ACCEPTED;
    issue();
    return tlm::TLM_COMPLETED;
  }
  KeptPayload payloads_[2];
  std::uint64_t left_ = 0;
  std::uint64_t address_ = 0;
};

// Keeps a memory's queue full of reads at random addresses.
class Saturator : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Saturator> socket{"socket"};
  explicit Saturator(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &Saturator::backward);
    for (KeptPayload& payload : payloads_) unused_.push_back(&payload);
  }
  void run(std::uint64_t count) {
    left_ = count;
    issue();
    sc_core::sc_start();
  }

 private:
  void issue() {
    while (!requesting_ && left_ > 0 && !unused_.empty()) {
      --left_;
      KeptPayload& payload = *unused_.back();
      unused_.pop_back();
      random_ = random_ * 6364136223846793005u + 1442695040888963407u;
      payload.prepare(tlm::TLM_READ_COMMAND, (random_ >> 33) % 0x40000000 / 64 * 64);
      requesting_ = true;
      tlm::tlm_phase phase = tlm::BEGIN_REQ;
      sc_core::sc_time time;
      if (socket->nb_transport_fw(payload, phase, time) == tlm::TLM_UPDATED) requesting_ = false;  // END_REQ
    }
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time&) {
    if (phase == tlm::END_REQ) {
      requesting_ = false;
      issue();
      return tlm::TLM_ACCEPTED;
    }
    answered_.push_back(static_cast<KeptPayload*>(&payload));
    if (answered_.size() > 8) {  // long after they have been let go
      unused_.push_back(answered_.front());
      answered_.erase(answered_.begin());
    }
    issue();
    return tlm::TLM_COMPLETED;
  }
  KeptPayload payloads_[64];
  std::vector<KeptPayload*> unused_, answered_;
  bool requesting_ = false;
  std::uint64_t left_ = 0;
  std::uint64_t random_ = 1;
};

// One timed event of the kernel after another.
class Ticker : public sc_core::sc_module {
 public:
  explicit Ticker(sc_core::sc_module_name name) : sc_module(name) {
    SC_HAS_PROCESS(Ticker);
    SC_METHOD(tick);
    sensitive << event_;
    dont_initialize();
  }
  void run(std::uint64_t count) {
    left_ = count;
    tick();
    sc_core::sc_start();
  }

 private:
  void tick() {
    if (left_-- > 0) event_.notify(sc_core::sc_time::from_value(1000));
  }
  sc_core::sc_event event_;
  std::uint64_t left_ = 0;
};

}  // namespace earshot
