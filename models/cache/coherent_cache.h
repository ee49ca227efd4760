// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A CoherentCache is a write-allocate cache between one TLM-2.0 initiator and a snooping bus, driven by a
// protocol table. Users instantiate one of its two kinds: UpdatingCache or InvalidatingCache.
//
// CPU side, TLM-2.0 base protocol (IEEE 1666-2011, 11 to 15). The bus's timing is the cache's:
//   annotated   b_transport adds the access's latency to the delay it is given and returns at once; it waits only if
//               another process holds the bus or a target of the bus waits. Safe under temporal decoupling.
//               nb_transport_fw completes early: TLM_COMPLETED with the latency added to the time. It may not wait, so
//               it is for platforms in which no target of the bus does.
//   arbitrated  b_transport waits for the delay it is given and until the access is really done; the delay is then 0.
//               nb_transport_fw follows the four phases: END_REQ when the access has found its line or a place among
//               the misses under way, BEGIN_RESP when it is done (and instead of END_REQ if it hits). Up to
//               `misses` lines are being fetched or asked for at once; hits go on meanwhile; an access to a line being
//               fetched joins that miss. Responses of different lines may overtake each other, of one line never;
//               an access over several lines is answered when its last one is done.
//               A payload with a memory manager is acquired until its response has ended. Phases out of order are
//               reported (SC_REPORT_ERROR "/earshot/cache/protocol") with the initiator's name.
//   transport_dbg   sees and writes the coherent value, takes no time, changes no state.
//   DMI             is refused for cached windows, passed on for uncached ones.
// An access that crosses lines is split; each part is coherent, the whole is not one atom. Byte enables and
// streaming width are honoured. TLM_IGNORE_COMMAND succeeds and does nothing. Errors: an address in no window,
// or an access that leaves its window, TLM_ADDRESS_ERROR_RESPONSE; no data, TLM_BURST_ERROR_RESPONSE; what memory refuses is passed back as memory said it, with nothing cached for it.
// Arbitrated, a write-back that memory refuses belongs to no access: the line stays, snooped, in its write-back slot
// and is reported (SC_REPORT_ERROR "/earshot/cache/memory").
//
// Ordering. Annotated: accesses take effect one at a time, in the order the kernel runs the initiators; under temporal
// decoupling that order, not the local times, is the memory order. It is sequentially consistent. Arbitrated: one
// access takes effect at a time, so initiators with one access outstanding see sequential consistency; an initiator
// with several outstanding sees coherence of every single location, in program order, and no order between locations.
//
// Configuration errors are reported from the constructor (SC_REPORT_ERROR, id "/earshot/cache/config").
#pragma once

#include <array>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/access_request.h"
#include "earshot/bus/oddities.h"
#include "earshot/bus/pieces.h"
#include "earshot/bus/transaction.h"
#include "earshot/cache/access_kind.h"
#include "earshot/cache/geometry.h"
#include "earshot/cache/line_store.h"
#include "earshot/observe/histogram.h"
#include "earshot/observe/observer.h"
#include "earshot/protocol/table.h"
#include "earshot/timing/agenda.h"
#include "earshot/timing/latency.h"
#include "earshot/timing/queue_meter.h"
#include "earshot/version.h"

namespace earshot {

struct CacheConfig {
  // Behaviour.
  Geometry geometry;
  std::shared_ptr<const Table> table;              // the protocol; the same for every cache of a bus

  // Timing.
  sc_core::sc_time hit_time{1, sc_core::SC_NS};    // to look a line up; every access pays it once a line

  // Arbitrated timing only.
  unsigned misses = 4;             // lines being fetched or asked for at once: at least 1
  unsigned write_back_slots = 2;   // victims on their way to memory: at least 1
};

// What the processor side of a cache saw. Counts are accesses, not lines: one that crosses lines counts once,
// as a hit if every line it touched was there.
struct CacheTotals {
  std::uint64_t reads = 0;
  std::uint64_t writes = 0;
  std::uint64_t hits = 0;
  std::uint64_t misses = 0;
  std::uint64_t uncached = 0;    // reads and writes of uncached windows; neither hits nor misses
  std::uint64_t errors = 0;      // accesses answered with an error; counted nowhere else
  std::array<Histogram, access_kinds> kind;  // latencies of cached accesses, in picoseconds
  LatencyParts parts;            // sums; their total is latency().sum()

  Histogram latency() const;     // of all kinds together

  void add(const CacheTotals& other);
};

class CoherentCache : public sc_core::sc_module,
                      private tlm::tlm_fw_transport_if<>,
                      private SnoopInterface {
 public:
  tlm::tlm_target_socket<> cpu_socket{"cpu_socket"};
  BusInitiatorSocket bus_socket{"bus_socket"};

  ~CoherentCache() override;

  CacheTotals totals() const;
  int port() const { return port_; }  // the bus port, from the bus's end of elaboration on
  const Table& table() const { return *table_; }

  // The name of the state the cache holds the line of `address` in; the absent state's if it holds none.
  const std::string& state_of(std::uint64_t address) const;

  // Gives up the line of `address` as a replacement would, written back if the cache owns it. From a simulation
  // process, or, annotated, after simulation if no target waits. Its time is added to nobody's delay; arbitrated, it
  // waits for a free write-back slot, not for the write-back.
  tlm::tlm_response_status replace(std::uint64_t address, const sc_core::sc_time& delay);
  // Writes back and gives up every line, one after another from `delay` on, to which it adds the time that takes;
  // arbitrated, it waits until all is done, for which the processor must be quiet. Callable as replace() is. Returns how many owned lines memory refused:
  // those stay.
  std::uint64_t flush(sc_core::sc_time& delay);
  // The number of lines this cache owns, that is, which memory may not have.
  std::uint64_t owned_lines() const;

  // Arbitrated timing: what fails of Little's law in the cache's queues, and of the parts of every latency adding up
  // to it. Any is a bug.
  std::vector<std::string> broken_laws() const;
  // Arbitrated timing: of misses under way, of victims in their slots, and of accesses that wait for a place.
  const QueueMeter* miss_queue() const;
  const QueueMeter* write_back_queue() const;
  const QueueMeter* access_queue() const;

  // `observer` must outlive the simulation; null for none.
  void set_observer(Observer* observer) { observer_ = observer; }

 protected:
  CoherentCache(sc_core::sc_module_name name, const CacheConfig& config, Family family, HeadersVersion headers);

 private:
  class Arbitrated;  // the engine of arbitrated timing
  friend class Arbitrated;

  // tlm_fw_transport_if
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) override;
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override;
  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override;
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override;

  // SnoopInterface
  unsigned attached(int port, const AddressMap& map, BusTiming timing) override;
  bool serves_io() const override { return table_->serves_io(); }
  SnoopAnswer ask(const BusTransaction& transaction) override;
  bool commit(const BusTransaction& transaction) override;
  std::uint8_t* copy_of(std::uint64_t line, bool& owner) override;
  void invalidate_direct_memory(std::uint64_t first, std::uint64_t last) override;
  bool granted(BusTransaction& transaction) override;
  void effected(BusTransaction& transaction) override;
  void finished(BusTransaction& transaction) override;
  void settled(std::uint64_t line) override;
  std::string waiting() const override;

  // How an access fares.
  struct Progress {
    sc_core::sc_time delay;
    LatencyParts parts;
    bool hit = true;
    AccessKind kind = AccessKind::read_hit;
    tlm::tlm_response_status status = tlm::TLM_OK_RESPONSE;
  };
  bool hit_quickly(tlm::tlm_generic_payload& payload);
  Pieces pieces_of(const tlm::tlm_generic_payload& payload);
  void count(bool write, const Progress& progress);
  void perform(const Piece& piece, std::uint8_t* line_bytes);

  void work() { agenda_.run(); }

  // Annotated timing.
  class Departure;
  class Arrival;
  void access(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay);
  void access_line(const Piece& piece, Progress& progress);
  bool hit_before_loss(const Piece& piece, const Progress& progress);
  void judge(const Piece& piece, Progress& progress);
  void fetch(const Piece& piece, BusTransaction& transaction, Progress& progress, Slot*& slot);
  void surrender(const Piece& piece, const BusTransaction& transaction, sc_core::sc_time& delay);
  tlm::tlm_response_status replace_now(std::uint64_t address, const sc_core::sc_time& delay);
  std::uint64_t flush_now(sc_core::sc_time& delay);
  tlm::tlm_response_status give_up(Slot& slot, sc_core::sc_time& delay);
  bool leave(Slot& slot);
  void come_back(Slot& slot, const Slot& before);
  tlm::tlm_response_status write_back(std::uint64_t line, std::vector<std::uint8_t>& bytes, sc_core::sc_time& delay);
  void set_state(Slot& slot, std::uint64_t line, StateId next);
  void no_row(StateId state, Event event, std::uint64_t line) const;
  void tell_access(const Piece& piece, const std::uint8_t* line_bytes);

  Slot* held(std::uint64_t line, std::uint8_t*& bytes);

  CacheConfig config_;
  std::shared_ptr<const Table> table_;
  Picoseconds hit_ps_;
  sc_core::sc_time hit_time_;
  LineStore store_;
  Observer* observer_ = nullptr;
  int port_ = -1;
  const AddressMap* map_ = nullptr;

  // The write-back slot: a victim on its way to memory is out of the store but still seen by debug accesses.
  std::uint64_t leaving_line_ = ~std::uint64_t{0};
  std::vector<std::uint8_t> leaving_;
  std::uint64_t incoming_line_ = ~std::uint64_t{0};
  std::vector<std::uint8_t> incoming_;  // a line being fetched

  Oddities oddities_;
  Picoseconds last_end_ = 0;           // of the last access that needed a table walk

  std::uint64_t fast_reads_ = 0;       // hits that took the short path: all cost hit_ps_
  std::uint64_t fast_writes_ = 0;
  CacheTotals totals_;                 // everything else

  Agenda agenda_;                           // of arbitrated timing
  std::unique_ptr<Arbitrated> arbitrated_;  // null: annotated timing
};

}  // namespace earshot
