// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A SnoopingBus joins coherent caches to memory and peripherals. A transaction takes effect at one instant, its
// grant: the bus asks every other cache, collects the shared and owner answers, moves the data and has every copy
// change state there. In order, one transaction costs
//   arbitration_cycles, then wait for the address bus; address_cycles; snoop_cycles;
//   a copy elsewhere: supply_cycles; or memory: what its target takes;
//   wait for the data bus; one cycle for every width bytes moved.
// update and write_through move the written bytes, write_through then ends when memory has them.
//
// split: the address bus and the data bus are granted apart, so that one transaction's snoop overlaps another's
// memory access and data. connected: the bus is held from the grant to the last beat.
//
// Timing annotated: nothing waits unless a target does (then later transactions queue behind it), the time is added
// to the caller's delay and safe under temporal decoupling; the buses are calendars booked earliest gap first, and so is
// each line of a split bus, which has one transaction at a time. A transaction takes effect when it is asked for, before
// the time of its grant: a read that another cache makes at a time before that grant still costs a hit.
// Timing arbitrated: requests queue and an arbiter grants them by event; at most `outstanding` transactions are under
// way, at most one for a line: later ones for it wait. The data bus serves whoever has data first. A request is judged
// at its grant, in the state the line is in then. Targets are called with nb_transport; one is told of a fetch at the
// grant, for the instant at which the snoop ends. A line that memory takes from its owner's answer stays one transaction's
// until memory has it. If memory refuses a line, other caches may have lost clean copies
// of it. If nothing completes for stall_cycles while something is outstanding, SC_REPORT_ERROR "/earshot/bus/stall"
// lists every queue, its head and what that waits for. (So a sc_start() without an end runs up to stall_cycles past
// the last transaction; 0 switches the watch off.) A line that memory let be read but refuses to take from its owner's
// answer is SC_REPORT_ERROR "/earshot/bus/memory", an impossible choice of a user's arbiter "/earshot/bus/arbiter".
//
// Configuration errors are reported from the constructor (SC_REPORT_ERROR, id "/earshot/bus/config", all in one
// message); a cache whose line differs, arbitration that does not fit the number of caches, or a wrong time resolution
// at end of elaboration.
#pragma once

#include <array>
#include <deque>
#include <functional>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/address_map.h"
#include "earshot/bus/arbiter.h"
#include "earshot/bus/presence_index.h"
#include "earshot/bus/transaction.h"
#include "earshot/bus/window_port.h"
#include "earshot/observe/histogram.h"
#include "earshot/timing/calendar.h"
#include "earshot/timing/queue_meter.h"
#include "earshot/version.h"

namespace earshot {

class LineTimes;

enum class BusStructure : std::uint8_t { connected, split };

struct SnoopingBusConfig {
  // Behaviour.
  std::vector<Window> windows;       // at least one; disjoint

  // Timing.
  BusTiming timing = BusTiming::annotated;
  BusStructure structure = BusStructure::split;
  sc_core::sc_time clock{5, sc_core::SC_NS};  // period; a whole number of picoseconds
  unsigned width_bytes = 8;          // bytes moved in a data-bus cycle: a power of two, 1 to 256
  unsigned arbitration_cycles = 1;   // from request to grant when nobody competes; overlaps others' transfers
  unsigned address_cycles = 1;
  unsigned snoop_cycles = 1;         // the other caches' lookup
  unsigned supply_cycles = 2;        // a cache reads a line out of its store for another
  unsigned turnaround_cycles = 0;    // nobody may drive the data bus for so long after every transfer

  // Arbitrated timing only; annotated timing serves first come, first served.
  ArbiterConfig arbiter;
  // If set, makes the arbiter instead: called once, at end of elaboration, with the number of ports.
  std::function<std::unique_ptr<Arbiter>(int ports)> make_arbiter;
  unsigned outstanding = 8;          // transactions under way, from grant to last beat: at least 1
  std::uint64_t stall_cycles = 1000000;  // without a completion until a stall is reported; 0: never
};

// What one kind of transaction did. Times are sums over `count` transactions.
struct BusKindTotals {
  std::uint64_t count = 0;
  Picoseconds time = 0;              // from request to completion
  Picoseconds wait = 0;              // of that: for the address and the data bus
  std::uint64_t address_cycles = 0;
  std::uint64_t data_cycles = 0;
  Histogram latency;                 // of `time`, picoseconds
};

// What one port waited for the grants of its requests. Arbitrated timing only.
struct BusPortTotals {
  std::uint64_t grants = 0;
  Picoseconds wait = 0;              // from request to grant, arbitration included: the sum
  Picoseconds longest_wait = 0;
};

struct SnoopingBusTotals {
  std::array<BusKindTotals, bus_kinds> kind;
  std::uint64_t supplied_by_owner = 0;   // lines fetched from another cache that answers for memory
  std::uint64_t supplied_by_sharer = 0;  // lines fetched from a clean copy in another cache
  std::uint64_t supplied_by_memory = 0;
  std::uint64_t block_reads = 0;     // lines read from memory
  std::uint64_t block_writes = 0;    // lines written to memory: write-backs, and supplies memory takes too
  std::uint64_t word_reads = 0;      // I/O ports' reads of less than a line that memory answered
  std::uint64_t word_writes = 0;     // write-throughs, and I/O ports' writes of less than a line
  Picoseconds address_busy = 0;      // connected: held, from grant to last beat
  Picoseconds data_busy = 0;         // turnaround included
  std::vector<BusPortTotals> ports;
};

// One queue of the bus, for reports. Arbitrated timing only.
struct BusQueue {
  std::string name;
  const QueueMeter* meter;
};

class SnoopingBus : public sc_core::sc_module, private RequestInterface, private WindowPort::Listener {
 public:
  BusTargetSocket cache_socket{"cache_socket"};

  SnoopingBus(sc_core::sc_module_name name, const SnoopingBusConfig& config,
              HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  ~SnoopingBus() override;
  const char* kind() const override { return "earshot::SnoopingBus"; }

  // The socket to bind to the target of a window. REQUIRES: a window of that name.
  tlm::tlm_initiator_socket<>& window_socket(const std::string& window);

  const AddressMap& address_map() const { return map_; }
  SnoopingBusTotals totals() const;
  // When the last transaction ended, in simulation time: annotated, its last booking of either bus; arbitrated, when
  // memory had all that belongs to it.
  Picoseconds busy_until() const;

  // Arbitrated timing: the queues, for reports.
  std::vector<BusQueue> queues() const;
  // What fails of: Little's law in every queue, the cycles moved being the time the buses were busy. Any is a bug.
  std::vector<std::string> broken_laws() const;
  // Every queue, its head and what it waits for, one a line; empty if nothing is outstanding.
  std::string waiting() const;

 private:
  class Arbitrated;  // the engine of arbitrated timing

  void end_of_elaboration() override;
  void work();
  void watch();

  // WindowPort::Listener
  void answered(WindowAccess& access) override;
  void direct_memory_ended(std::uint64_t first, std::uint64_t last) override;

  // RequestInterface
  bool acquire() override;
  void release() override;
  void transact(BusTransaction& transaction, sc_core::sc_time& delay) override;
  void pass_through(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay, LatencyParts& parts) override;
  void request(BusTransaction& transaction) override;
  bool in_flight(std::uint64_t line) const override;
  const std::uint8_t* copy_before_loss(int requester, std::uint64_t line, Picoseconds time) const override;
  unsigned line_bytes() const override { return line_bytes_; }
  void dropped(int requester, std::uint64_t line) override { presence_.remove(line, requester); }
  unsigned debug(tlm::tlm_generic_payload& payload) override;
  bool direct_memory(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override;

  // The steps of one transaction.
  struct Snoop {
    PresenceIndex::Mask others = 0;  // the ports that hold the line
    bool shared = false;
    bool owner = false;              // the supplier owns the line
    bool write_memory = false;
    const std::uint8_t* supplied = nullptr;  // null: nobody supplies
  };
  void count(BusKind kind, Picoseconds requested, Picoseconds completed, Picoseconds wait);
  void count_supply(const BusTransaction& transaction);
  void count_memory(const BusTransaction& transaction, bool whole_line);
  // An I/O write ends a copy that memory is older than: the line goes to memory with the word in it. Makes it in `line`.
  // False: the word alone goes.
  bool merged(const BusTransaction& transaction, const Snoop& snoop, std::uint8_t* line) const;
  Picoseconds cycles(std::uint64_t count) const { return count * period_; }
  std::uint64_t beats(std::uint64_t bytes) const { return (bytes + config_.width_bytes - 1) >> width_shift_; }
  Snoop ask_others(const BusTransaction& transaction);
  void commit_others(const BusTransaction& transaction, PresenceIndex::Mask others);

  // Annotated timing.
  class Waiter;
  struct Hold {  // of a connected bus
    Picoseconds start;
  };
  bool memory_phase(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time);
  void fetch_line(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time);
  void io_read(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time);
  void io_write(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time);
  unsigned data_bytes(const BusTransaction& transaction) const;
  // Books the address phase / `bytes` of data at or after `time`, and moves `time` to its end.
  Hold address_phase(BusKind kind, unsigned bytes, const Calendar* line, Picoseconds& time, LatencyParts& parts);
  void data_phase(BusKind kind, unsigned bytes, const Hold& hold, Picoseconds& time, LatencyParts& parts);
  void let_go(const Hold& hold, Picoseconds time);
  // One access to a window's target, starting at `time`, which moves to its end: one call of the target, or several.
  void access_target(int window, tlm::tlm_generic_payload& payload, Picoseconds& time, LatencyParts& parts);
  void access_target_once(WindowPort& target, tlm::tlm_generic_payload& payload, Picoseconds& time,
                          LatencyParts& parts);
  void access_memory(tlm::tlm_command command, std::uint64_t address, std::uint8_t* data, unsigned length,
                     const std::uint8_t* byte_enable, Picoseconds& time, LatencyParts& parts,
                     tlm::tlm_response_status& status);

  SnoopingBusConfig config_;
  Picoseconds period_;
  unsigned width_shift_;             // log2 of the width
  AddressMap map_;
  std::vector<std::unique_ptr<WindowPort>> targets_;  // one a window, same order
  std::vector<SnoopInterface*> caches_;               // by port; set at end of elaboration
  unsigned line_bytes_ = 0;

  PresenceIndex presence_;
  Calendar address_bus_;
  std::unique_ptr<LineTimes> lines_;   // annotated timing
  Calendar data_bus_;
  SnoopingBusTotals totals_;
  std::uint64_t transfers_ = 0;     // over the data bus

  bool held_ = false;               // between acquire() and release()
  std::deque<const Waiter*> queue_; // processes in acquire(), first come first served
  sc_core::sc_event released_{"released"};
  int requester_ = -1;              // of the transaction in progress, whose line arrives while a target waits
  tlm::tlm_generic_payload memory_payload_;  // reused: fetches, write-backs, write-throughs
  MemoryTimes memory_times_;

  std::unique_ptr<Arbitrated> arbitrated_;
};

}  // namespace earshot
