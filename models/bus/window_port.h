// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A WindowPort is the bus's initiator socket for one window, TLM-2.0 base protocol. Annotated timing calls the
// target with b_transport through `socket`. Arbitrated timing sends accesses with nb_transport: one request phase at
// a time (IEEE 1666-2011, 15.2.6.2, the request exclusion rule), later accesses queue here; responses may come in any
// order and are taken at once (END_RESP by early completion). Phases out of order from a target are reported
// (SC_REPORT_ERROR, id "/earshot/bus/protocol"). The first answer without a response status, and a cached window's
// first refusal, are told (SC_REPORT_WARNING, id "/earshot/bus/target").
#pragma once

#include <deque>
#include <functional>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/access_pieces.h"
#include "earshot/bus/address_map.h"
#include "earshot/timing/agenda.h"
#include "earshot/timing/latency.h"
#include "earshot/timing/queue_meter.h"

namespace earshot {

// One access to a window's target. The payload is the bus's own: a caller's need not have a memory manager and may
// not be changed. Made by a WindowAccessPool.
struct WindowAccess : tlm::tlm_generic_payload {
  explicit WindowAccess(tlm::tlm_mm_interface* pool) : tlm_generic_payload(pool) { set_extension(&times); }
  ~WindowAccess() override { clear_extension(&times); }
  WindowAccess(const WindowAccess&) = delete;
  WindowAccess& operator=(const WindowAccess&) = delete;

  MemoryTimes times;
  void* transaction = nullptr;    // whose access it is
  Picoseconds ready = 0;          // when the bus has it for the target
  Picoseconds asked = 0;          // the call of send(), for the queue's meter
  Picoseconds sent = 0;           // the begin of its request phase, at or after `ready`
  Picoseconds ended = 0;          // when the target was done
  bool requesting = false;        // its request phase has not ended
  bool answered = false;          // the target has sent its response, of several its first
  AccessPieces pieces;            // what is sent to the target for it
  WindowAccess* whole = nullptr;  // if it is one of several: of what
};

// Accesses by the handful, reused when everybody who has acquired one has released it.
class WindowAccessPool : private tlm::tlm_mm_interface {
 public:
  WindowAccess& acquire();

 private:
  void free(tlm::tlm_generic_payload* payload) override;
  std::vector<std::unique_ptr<WindowAccess>> all_;
  std::vector<WindowAccess*> unused_;
};

class WindowPort : public sc_core::sc_module, private tlm::tlm_bw_transport_if<> {
 public:
  tlm::tlm_initiator_socket<> socket{"socket"};

  struct Listener {
    virtual ~Listener() = default;
    // The target's answer is known: access.ended says when it is there, now or later.
    virtual void answered(WindowAccess& access) = 0;
    virtual void direct_memory_ended(std::uint64_t first, std::uint64_t last) = 0;  // bus addresses
    // A target's nb_transport_bw is under way: no target is called with nb_transport_fw from within it (IEEE
    // 1666-2011, 11.1.2.4).
    bool on_backward_path = false;
  };

  WindowPort(sc_core::sc_module_name name, const Window& window, Listener& listener);
  const char* kind() const override { return "earshot::WindowPort"; }

  // Sends the access, at its bus address, when the target can take it, not before access.ready. Arbitrated timing.
  void send(WindowAccess& access);

  // To be asked of every answer of the target, of either timing: takes its response status for what the window says
  // of its target, and reports. `piece` has been sent.
  void judge(tlm::tlm_generic_payload& payload, const AccessPieces& piece);

  const Window& window() const { return window_; }
  const QueueMeter& queue() const { return queue_meter_; }     // from send() to the begin of the request phase
  const QueueMeter& target() const { return target_meter_; }   // from there to the target's answer being known
  // What is queued here or at the target, one a line; empty if nothing is.
  std::string waiting() const;

 private:
  tlm::tlm_sync_enum nb_transport_bw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override;
  void invalidate_direct_mem_ptr(sc_dt::uint64 first, sc_dt::uint64 last) override;

  void work() { agenda_.run(); }
  void enqueue(WindowAccess& access);
  void send_piece(WindowAccess* whole);
  void piece_answered(WindowAccess& piece, WindowAccess& whole);
  void warn_once(bool& warned, const std::string& what) const;
  void send_next();
  void begin(WindowAccess& access);
  void end_request(WindowAccess& access, Picoseconds when);
  void next_request(WindowAccess* access);
  void send_later(WindowPort*) { send_next(); }
  tlm::tlm_sync_enum target_says(tlm::tlm_generic_payload& payload, const tlm::tlm_phase& phase, Picoseconds when);
  bool at_target(const WindowAccess& access) const;
  void respond(WindowAccess& access, Picoseconds when);
  void end_response(WindowAccess* access);
  WindowAccess& known(tlm::tlm_generic_payload& payload, const char* phase);
  void misuse(const std::string& what) const;

  Window window_;
  Listener& listener_;
  Agenda agenda_;
  bool busy_ = false;                      // a request phase is under way
  std::deque<WindowAccess*> queue_;
  std::vector<WindowAccess*> at_target_;
  WindowAccessPool pieces_;
  bool warned_no_status_ = false, warned_refusal_ = false;
  QueueMeter queue_meter_;
  QueueMeter target_meter_;
};

}  // namespace earshot
