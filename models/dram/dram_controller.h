// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A DramController is a DRAM memory behind its controller: channels, ranks, banks, queues, a scheduler. It is
// an ordinary TLM-2.0 base-protocol target, useful without our bus. What was never written reads as 0.
//
// Time. A request is split into bursts of burst_bytes; a smaller one costs a burst all the same. It enters
// the queues of its channels in order of arrival, at the first clock edge, and there its bytes move: the
// order in which requests enter is the order of memory. A read is done with its last beat, a write when it is
// queued; both then take the controller's latency (`frontend` + `backend`; it does not matter here where in
// the controller it is spent). Edge n of the clock is at floor(n * period) ps since time 0.
//
// event_driven:
//   b_transport waits for the delay it is given, then until the access is done, and returns with the delay 0.
//   Any number of processes may be in it.
//
//   nb_transport_fw(BEGIN_REQ, t) takes effect t from now. If there is room in the queues at once it answers
//   TLM_UPDATED with END_REQ, else TLM_ACCEPTED and sends END_REQ when the whole request is in. BEGIN_RESP
//   follows; one of them at a time: the next waits for END_RESP, or TLM_COMPLETED. Responses overtake each
//   other, but never those of requests that share a burst. A payload with a memory manager is held from
//   BEGIN_REQ until END_RESP. Bad or ignored transactions are completed early (TLM_COMPLETED). A phase out of
//   order is reported as an error, id "/earshot/dram/protocol", with the initiator's name, and changes nothing.
//
//   Requests of one burst take effect in the order in which they arrive. Nothing is promised between different
//   bursts while both are outstanding.
// annotated:
//   b_transport adds to the delay and never waits, nb_transport_fw completes early; safe under temporal
//   decoupling. Contention is an estimate (dram_estimate.h).
//
// A MemoryTimes extension on the payload is told the waiting: from arrival to the first DRAM command that is
// issued for this request (for a write: to its place in the queue), and from the end of the access to the
// response if that is kept back. The rest of the latency is service; together they are exact.
//
// Accesses beyond the capacity: TLM_ADDRESS_ERROR_RESPONSE. DMI is granted page by page. Bad configuration is
// reported by the constructor, all of it in one error, id "/earshot/dram/config".
#pragma once

#include <array>
#include <deque>
#include <memory>
#include <queue>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/dram/dram_channel.h"
#include "earshot/dram/dram_estimate.h"
#include "earshot/dram/sparse_bytes.h"
#include "earshot/timing/latency.h"
#include "earshot/version.h"

namespace earshot {

class DramController : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  tlm::tlm_target_socket<> target_socket{"target_socket"};

  DramController(sc_core::sc_module_name name, const DramConfig& config,
                 HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  const char* kind() const override { return "earshot::DramController"; }

  const DramConfig& config() const { return config_; }

  // Of the busiest channel's data bus: the sum over all bursts. Utilisation is this over elapsed time.
  Picoseconds busy_time() const;
  Picoseconds busy_until() const;

  // The rest concerns what has happened until now. Nothing of it changes a result.
  DramCounts counts();
  // In the order of their clocks; empty without config.log_commands, and for the annotated pace.
  const std::vector<CommandRecord>& commands(unsigned channel);
  // Bursts in a channel's queues, in clocks; requests without a place there yet, in picoseconds.
  // REQUIRES of the first two: event_driven.
  const QueueMeter& read_meter(unsigned channel) const { return lanes_[channel].channel->read_meter(); }
  const QueueMeter& write_meter(unsigned channel) const { return lanes_[channel].channel->write_meter(); }
  const QueueMeter& entry_meter() const { return entry_meter_; }

  std::vector<std::string> broken_laws() const;  // the self-checks that fail
  // A line for each queue that is not empty: its head, and what that waits for.
  std::vector<std::string> pending();

  // Copies bytes out, without time or side effect. REQUIRES: address + length does not pass the end of the
  // space.
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const {
    bytes_.read(address, to, length);
  }

 private:
  static constexpr unsigned nobody = ~0u;
  struct Request {
    tlm::tlm_generic_payload* payload = nullptr;
    bool blocking = false;
    bool complete = false;  // but for responses that go before
    Picoseconds arrived = 0, completed = 0;
    Clocks started = 0, done = 0;
    std::uint64_t first_burst = 0, last_burst = 0;
    unsigned bursts = 0, entered = 0, finished = 0;
    unsigned older = nobody, younger = nobody;  // of those without a response yet, in order of arrival
    unsigned waits_for = 0;       // older outstanding requests with a burst in common
    bool followed = false;        // a younger one waits for this
    sc_core::sc_event responded;  // wakes the caller of b_transport
  };
  // A time, and the number of the clock edge at which it is.
  struct Moment {
    Picoseconds time = ~Picoseconds{0};
    Clocks clock = DramChannel::never;  // never: not known
  };
  // A time, the first edge at or after it and the last one at or before it.
  struct Instant {
    Picoseconds time = 0;
    Clocks next = 0, passed = 0;
  };
  struct Lane {
    std::unique_ptr<DramChannel> channel;
    Clocks caught_up = 0;  // arrivals see the commands of all clocks before this one as issued
    Moment wake;           // the last answer of wake_of()
  };
  struct Appointment {
    Picoseconds time;
    Clocks clock;
    std::uint64_t order;
    unsigned id;
    bool operator>(const Appointment& other) const {
      return time != other.time ? time > other.time : order > other.order;
    }
  };
  using Agenda = std::priority_queue<Appointment, std::vector<Appointment>, std::greater<>>;

  // dram_controller.cpp: the requests' way through
  void work();
  unsigned take(tlm::tlm_generic_payload& payload, bool blocking);
  void arrive(unsigned id);
  void enter();
  bool enter_bursts(unsigned id);
  DramBurst burst_of(const Request& request, unsigned id, unsigned index) const;
  void note_completions();
  void complete(unsigned id);
  void respond(unsigned id);
  static bool overlap(const Request& one, const Request& other) {
    return one.first_burst <= other.last_burst && other.first_burst <= one.last_burst;
  }
  unsigned& touched(std::uint64_t burst) { return touched_[burst % touched_.size()]; }
  void forget(unsigned id);
  void tell_waiting(Request& request) const;
  void schedule();
  void catch_up();
  void catch_up(Lane& lane);
  // A division costs more than most of what is done here: its last result is kept.
  const Instant& instant() const {
    if (now_ps() != instant_.time) {
      const ExactClock& clock = config_.grade.clock;
      const Clocks next = clock.edge_at_or_after(now_ps());
      instant_ = {now_ps(), next, clock.edge(next) == now_ps() ? next : next - 1};
    }
    return instant_;
  }
  Clocks clock_now() const { return instant().next; }
  Moment wake_of(Lane& lane) const;
  Clocks latency() const { return config_.frontend + config_.backend; }

  // dram_controller_socket.cpp: the socket
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) override;
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override;
  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override;
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override;
  bool answered_at_once(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay);
  void estimate(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay);
  tlm::tlm_sync_enum begin_request(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                   sc_core::sc_time& time);
  tlm::tlm_sync_enum end_response(tlm::tlm_generic_payload& payload, const sc_core::sc_time& time);
  void end_request(unsigned id);
  void send_responses();
  void close_response(const sc_core::sc_time& time);
  void protocol_error(const tlm::tlm_generic_payload& payload, const std::string& got,
                      const std::string& expected);
  std::string initiator_name() const;

  const DramConfig config_;
  const std::uint64_t burst_bytes_;
  std::uint64_t last_byte_ = 0;
  SparseBytes bytes_;
  std::unique_ptr<DramAddressMap> map_;
  std::vector<Lane> lanes_;                  // event_driven: by channel
  std::unique_ptr<DramEstimate> estimate_;  // annotated
  mutable Instant instant_;                 // the last answer of instant()
  Moment wake_moment_;                      // what wake_ has been notified for

  std::vector<std::unique_ptr<Request>> requests_;  // by id; those of free_ids_ are not in use
  std::vector<unsigned> free_ids_;
  Agenda coming_;               // nonblocking requests that take effect later
  std::deque<unsigned> entry_;  // arrived, not wholly in the queues
  Agenda completing_;
  unsigned oldest_ = nobody, youngest_ = nobody;  // without a response yet
  // How many of those touch a burst whose number leaves this remainder: nobody need be asked where it is 0.
  std::array<unsigned, 1024> touched_{};
  std::deque<unsigned> responses_;   // nonblocking, ready to be sent
  unsigned request_open_ = nobody;   // BEGIN_REQ without END_REQ
  unsigned response_open_ = nobody;  // BEGIN_RESP without END_RESP
  Picoseconds response_from_ = 0;    // an END_RESP takes effect
  bool working_ = false, entering_ = false, sending_ = false;
  bool answer_inline_ = false;  // the END_REQ of request_open_ is what nb_transport_fw returns
  std::uint64_t order_ = 0;

  QueueMeter entry_meter_;
  std::vector<DramCompletion> completions_;
  sc_core::sc_event wake_;
};

}  // namespace earshot
