// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An IoPort puts an ordinary TLM-2.0 initiator without a cache (a DMA engine, a GPU, an Ethernet model) on a snooping
// bus and keeps it coherent: it reads what the owner has, without disturbing anybody's copy, and what it writes goes to
// memory and reaches every copy (update family) or ends it (invalidate family), with no dirty line's other bytes lost.
//
//   io_socket      base protocol. b_transport as a cache's: annotated, the time is added to the delay; arbitrated, it
//                  waits until the access is done. nb_transport: four phases, one request at a time (the adapter of
//                  tlm_utils::simple_target_socket). transport_dbg, DMI: as a cache's.
//   bus_socket     bind it to SnoopingBus::cache_socket, as a cache's.
// An access is taken apart into lines; each is one bus transaction, io-read or io-write, the whole is not one atom. A
// write is in order with everybody else's from its grant on; its initiator is answered when memory has the word. If
// memory refuses the word, copies have taken it, or are gone, all the same. Errors, byte enables and streaming width: as
// a cache's. Every cache on the bus needs a protocol with rows for an I/O port (a configuration error otherwise).
#pragma once

#include <array>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_target_socket.h>
#include <vector>

#include "earshot/bus/access_request.h"
#include "earshot/bus/oddities.h"
#include "earshot/bus/pieces.h"
#include "earshot/bus/transaction.h"
#include "earshot/observe/histogram.h"
#include "earshot/observe/observer.h"
#include "earshot/version.h"

namespace earshot {

struct IoPortTotals {
  std::uint64_t reads = 0;
  std::uint64_t writes = 0;
  std::uint64_t uncached = 0;  // reads and writes of uncached windows
  std::uint64_t errors = 0;    // accesses answered with an error; counted nowhere else
  Histogram latency;           // of reads and writes, picoseconds
  LatencyParts parts;          // sums; their total is latency.sum()
};

class IoPort : public sc_core::sc_module, private SnoopInterface {
 public:
  tlm_utils::simple_target_socket<IoPort> io_socket{"io_socket"};
  BusInitiatorSocket bus_socket{"bus_socket"};

  explicit IoPort(sc_core::sc_module_name name, HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  ~IoPort() override;
  const char* kind() const override { return "earshot::IoPort"; }

  const IoPortTotals& totals() const { return totals_; }
  int port() const { return port_; }  // the bus port, from the bus's end of elaboration on
  // `observer` must outlive the simulation; null for none.
  void set_observer(Observer* observer) { observer_ = observer; }

 private:
  // One line's part of an access, or an uncached one, on the bus in arbitrated timing. The initiator's process may be
  // killed meanwhile, its buffers with it: hence buffers of its own.
  struct Job;

  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay);
  unsigned transport_dbg(tlm::tlm_generic_payload& payload);
  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi);

  struct Progress {
    LatencyParts parts;
    tlm::tlm_response_status status = tlm::TLM_OK_RESPONSE;
  };
  void access_now(const Piece& piece, sc_core::sc_time& delay, Progress& progress);
  void access_by_grant(const Piece& piece, Progress& progress);
  void pass_by_grant(tlm::tlm_generic_payload& payload, Progress& progress);
  void wait_for(Job& job);
  Job& new_job();
  void tell(const BusTransaction& transaction, const std::uint8_t* bytes) const;

  // SnoopInterface: no copies, so nothing to snoop.
  unsigned attached(int port, const AddressMap& map, BusTiming timing) override;
  bool serves_io() const override { return true; }
  SnoopAnswer ask(const BusTransaction&) override { return {}; }
  bool commit(const BusTransaction&) override { return false; }
  bool granted(BusTransaction&) override { return true; }
  void effected(BusTransaction& transaction) override;
  void finished(BusTransaction& transaction) override;
  void settled(std::uint64_t line) override;
  std::string waiting() const override;
  std::uint8_t* copy_of(std::uint64_t, bool&) override { return nullptr; }
  void invalidate_direct_memory(std::uint64_t first, std::uint64_t last) override;

  Observer* observer_ = nullptr;
  int port_ = -1;
  const AddressMap* map_ = nullptr;
  BusTiming timing_ = BusTiming::annotated;
  std::vector<std::unique_ptr<Job>> jobs_;
  std::vector<Job*> unused_;
  sc_core::sc_event done_{"done"};
  IoPortTotals totals_;
  Oddities oddities_;
};

}  // namespace earshot
