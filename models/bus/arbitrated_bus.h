// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The engine of a SnoopingBus in arbitrated timing: from request to grant, through snoop, memory and data bus, to the
// last beat and the end of what memory still has to take. Internal to the bus; the contract is RequestInterface's.
#pragma once

#include <array>
#include <memory>
#include <string>
#include <vector>

#include "earshot/bus/request_queue.h"
#include "earshot/bus/snooping_bus.h"
#include "earshot/timing/agenda.h"

namespace earshot {

class SnoopingBus::Arbitrated {
 public:
  explicit Arbitrated(SnoopingBus& bus) : bus_(bus) {}

  void start();  // at end of elaboration
  const sc_core::sc_event& due() const { return agenda_.due(); }
  void work() { agenda_.run(); }
  const sc_core::sc_event& stall() const { return stall_; }
  void watch();  // at stall()

  void request(BusTransaction& transaction);
  bool in_flight(std::uint64_t line) const { return requests_.locked(line); }
  void answered(WindowAccess& access);

  // The ports whose transaction for the line is under way: they may have bytes of it that no copy has yet.
  PresenceIndex::Mask requesters(std::uint64_t line) const;
  // A debugger wrote memory: what is on its way there or to other copies must not undo it. Or it has read memory: what
  // is on its way there counts already.
  void debug(bool write, std::uint64_t address, std::uint8_t* bytes, unsigned length);

  Picoseconds busy_until() const { return last_end_; }
  std::vector<BusQueue> queues() const;
  std::string waiting() const;

 private:
  // What a granted transaction waits for.
  enum class Stage : std::uint8_t { snoop, memory, data, memory_write };

  struct Active {
    BusTransaction* transaction = nullptr;  // the requester's; null once finished
    BusKind kind = BusKind::read;           // of it, and
    std::uint64_t line = 0;
    int port = 0;
    bool uncached = false;                  // of a window without caching: it has no line
    bool effected = false;
    bool memory_takes_line = false;
    Stage stage = Stage::snoop;
    unsigned bytes = 0;                     // to move over the data bus
    Picoseconds ready = 0, start = 0, end = 0;  // of that, once planned
    Picoseconds granted = 0;
    Picoseconds since = 0;                  // in this stage
    WindowAccess* access = nullptr;
    // The broadcast word, or the line that memory takes: the requester's own may change before memory has them.
    std::array<std::uint8_t, 256> buffer;
  };

  void arbitrate(void*);
  void schedule(Picoseconds time);
  bool grant(const RequestQueue::Request& request);
  void begin(Active& active);
  void snoop(Active& active);
  void commit(Active& active, const Snoop& snoop);
  void snoop_ended(Active* active);
  void need_data_bus(Active& active, Picoseconds ready);
  void plan_transfer();
  void transferred(Active* active);
  void need_memory(Active& active, tlm::tlm_command command, std::uint8_t* data, unsigned length, Picoseconds ready);
  void io_read(Active& active, const Snoop& snoop);
  void io_write(Active& active, const Snoop& snoop);
  void memory_done(Active* active);
  void finish(Active& active, tlm::tlm_response_status status);
  void settle(Active& active);
  void let_go(Active& active);
  void bus_free(Active* active);
  void enter(Active& active, Stage stage);
  void watch_from_here();

  Active& new_active();

  SnoopingBus& bus_;
  Agenda agenda_;
  std::unique_ptr<Arbiter> arbiter_;
  RequestQueue requests_;
  Picoseconds next_arbitration_ = RequestQueue::never;
  bool held_ = false;                   // connected: between grant and last beat
  Picoseconds address_free_ = 0;        // split: the end of the address phase under way
  Picoseconds data_free_ = 0;           // the end of the last transfer's turnaround
  std::vector<Active*> transfers_;      // planned, by the time they are ready; only the first may have begun
  std::size_t metered_ = 0;             // so many of them data_meter_ knows
  unsigned outstanding_ = 0;            // granted, not finished

  std::vector<std::unique_ptr<Active>> actives_;
  std::vector<Active*> active_;         // under way, in the order of their grants
  std::vector<Active*> unused_;
  WindowAccessPool accesses_;

  QueueMeter request_meter_, outstanding_meter_, data_meter_;

  Picoseconds last_end_ = 0;

  // For the report of a stall.
  std::uint64_t completions_ = 0;
  std::uint64_t completions_seen_ = 0;
  bool watching_ = false;
  sc_core::sc_event stall_{"stall"};
};

}  // namespace earshot
