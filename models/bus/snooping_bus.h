// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A SnoopingBus joins coherent caches to memory and peripherals. A transaction takes effect at one instant,
// its grant: the bus asks every other cache, collects the shared and owner answers, moves the data and has
// every copy change state there. Address phase and data phase use separate buses, so that one transaction's
// snoop overlaps another's data (a split bus), each kept on a calendar booked earliest gap first.
//
// Timing is annotated: nothing waits unless a target does (then later transactions queue behind it), the time
// is added to the caller's delay and safe under temporal decoupling. In order, one transaction costs
//   arbitration_cycles, then wait for the address bus; address_cycles; snoop_cycles;
//   a copy elsewhere: supply_cycles; or memory: what its target adds;
//   wait for the data bus; one cycle for every width bytes moved.
// update and write_through move the written bytes, write_through then ends when memory has them.
//
// Configuration errors are reported from the constructor (SC_REPORT_ERROR, id "/earshot/bus/config", all in one
// message), a cache whose line differs or a wrong time resolution at end of elaboration.
#pragma once

#include <algorithm>
#include <array>
#include <deque>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/address_map.h"
#include "earshot/bus/presence_index.h"
#include "earshot/bus/transaction.h"
#include "earshot/timing/calendar.h"

namespace earshot {

struct SnoopingBusConfig {
  // Behaviour.
  std::vector<Window> windows;       // at least one; disjoint

  // Timing.
  sc_core::sc_time clock{5, sc_core::SC_NS};  // period; a whole number of picoseconds
  unsigned width_bytes = 8;          // bytes moved in a data-bus cycle: a power of two, 1 to 256
  unsigned arbitration_cycles = 1;   // from request to grant when nobody competes; overlaps others' transfers
  unsigned address_cycles = 1;
  unsigned snoop_cycles = 1;         // the other caches' lookup
  unsigned supply_cycles = 2;        // a cache reads a line out of its store for another
};

// What one kind of transaction did. Times are sums over `count` transactions.
struct BusKindTotals {
  std::uint64_t count = 0;
  Picoseconds time = 0;              // from request to completion
  Picoseconds wait = 0;              // of that: for the address and the data bus
  std::uint64_t address_cycles = 0;
  std::uint64_t data_cycles = 0;
};

struct SnoopingBusTotals {
  std::array<BusKindTotals, bus_kinds> kind;
  std::uint64_t supplied_by_owner = 0;   // lines fetched from another cache that answers for memory
  std::uint64_t supplied_by_sharer = 0;  // lines fetched from a clean copy in another cache
  std::uint64_t supplied_by_memory = 0;
  std::uint64_t block_reads = 0;     // lines read from memory
  std::uint64_t block_writes = 0;    // lines written to memory: write-backs, and supplies memory takes too
  std::uint64_t word_writes = 0;     // write-throughs
  Picoseconds address_busy = 0;
  Picoseconds data_busy = 0;
};

class SnoopingBus : public sc_core::sc_module, private RequestInterface {
 public:
  BusTargetSocket cache_socket{"cache_socket"};

  SnoopingBus(sc_core::sc_module_name name, const SnoopingBusConfig& config);
  ~SnoopingBus() override;
  const char* kind() const override { return "earshot::SnoopingBus"; }

  // The socket to bind to the target of a window. REQUIRES: a window of that name.
  tlm::tlm_initiator_socket<>& window_socket(const std::string& window);

  const AddressMap& address_map() const { return map_; }
  SnoopingBusTotals totals() const;
  // The end of the latest booking of either bus, in simulation time.
  Picoseconds busy_until() const { return std::max(address_bus_.last_end(), data_bus_.last_end()); }

 private:
  // One per window: the bus's initiator socket and its backward path.
  class TargetPort;

  void end_of_elaboration() override;

  // RequestInterface
  bool acquire() override;
  void release() override;
  void transact(BusTransaction& transaction, sc_core::sc_time& delay) override;
  void pass_through(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay, LatencyParts& parts) override;
  void dropped(int requester, std::uint64_t line) override { presence_.remove(line, requester); }
  unsigned debug(tlm::tlm_generic_payload& payload) override;
  bool direct_memory(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override;

  // The steps of one transaction.
  struct Snoop;
  void count(BusKind kind, Picoseconds requested, Picoseconds completed, Picoseconds wait);
  Snoop ask_others(const BusTransaction& transaction);
  void commit_others(const BusTransaction& transaction, PresenceIndex::Mask others);
  bool memory_phase(BusTransaction& transaction, Snoop& snoop, Picoseconds& time);
  void fetch_line(BusTransaction& transaction, Snoop& snoop, Picoseconds& time);

  class Waiter;

  // Books the address phase / `bytes` of data at or after `time`, and moves `time` to its end.
  void address_phase(BusKind kind, Picoseconds& time, LatencyParts& parts);
  void data_phase(BusKind kind, unsigned bytes, Picoseconds& time, LatencyParts& parts);
  // One access to a window's target, starting at `time`, which moves to its end.
  void access_target(int window, tlm::tlm_generic_payload& payload, Picoseconds& time, LatencyParts& parts);
  void access_memory(tlm::tlm_command command, std::uint64_t address, std::uint8_t* data, unsigned length,
                     const std::uint8_t* byte_enable, Picoseconds& time, LatencyParts& parts,
                     tlm::tlm_response_status& status);

  SnoopingBusConfig config_;
  Picoseconds period_;
  AddressMap map_;
  std::vector<std::unique_ptr<TargetPort>> targets_;  // one a window, same order
  std::vector<SnoopInterface*> caches_;               // by port; set at end of elaboration
  unsigned line_bytes_ = 0;

  PresenceIndex presence_;
  Calendar address_bus_;
  Calendar data_bus_;
  SnoopingBusTotals totals_;

  bool held_ = false;               // between acquire() and release()
  std::deque<const Waiter*> queue_; // processes in acquire(), first come first served
  sc_core::sc_event released_{"released"};
  int requester_ = -1;              // of the transaction in progress, whose line arrives while a target waits
  tlm::tlm_generic_payload memory_payload_;  // reused: fetches, write-backs, write-throughs
  MemoryTimes memory_times_;
};

}  // namespace earshot
