// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What travels between a cache and the bus, and the interfaces of the two sides. The payload is not the
// generic payload: a coherent transaction carries mandatory meaning, so it has a protocol type of its own
// (IEEE 1666-2011, 14.2.2: mandatory extensions require new protocol traits), and binding a cache to
// something that is no snooping bus does not compile.
#pragma once

#include <cstdint>
#include <string>
#include <tlm>

#include "earshot/bus/address_map.h"
#include "earshot/protocol/events.h"
#include "earshot/timing/latency.h"
#include "earshot/timing/timeline.h"

namespace earshot {

// How a bus, and with it every cache on it, lets time pass.
enum class BusTiming : std::uint8_t {
  annotated,   // calls return at once with the time added to their delay; nothing waits unless a target does
  arbitrated,  // requests queue, an arbiter grants by event, calls block until the access is really done
};

enum class Supplier : std::uint8_t { none, memory, owner, sharer };

// One coherent bus transaction. The requester owns it and every buffer it points to: annotated, for the call of
// transact(); arbitrated, from request() to finished().
struct BusTransaction {
  // Set by the requester: annotated, before transact(); arbitrated, requester and line before request(), the rest
  // by granted().
  BusKind kind = BusKind::read;
  int requester = 0;               // the port given by SnoopInterface::attached()
  std::uint64_t line = 0;          // the line's address
  std::uint8_t* line_data = nullptr;   // read, read_exclusive: receives the line; write_back: is the line
  // update, write_through, I/O port's: the bytes in question are [offset, offset + length) of the line. An I/O port's
  // io_read receives them, alone, in line_data.
  std::uint32_t offset = 0;
  std::uint32_t length = 0;
  const std::uint8_t* word = nullptr;          // those bytes, written
  const std::uint8_t* byte_enable = nullptr;   // null, or one flag a byte: TLM_BYTE_ENABLED or not
  // Arbitrated only: the access's second transaction, asked for before the first one of the line is settled. No other
  // requester's transaction for the line comes between: else two could take the line from each other for ever.
  bool follows_up = false;
  tlm::tlm_generic_payload* io = nullptr;      // of an uncached window (arbitrated only): what is passed on

  // Set by the bus.
  bool shared = false;             // another cache still holds the line
  Supplier supplier = Supplier::none;
  tlm::tlm_response_status status = tlm::TLM_INCOMPLETE_RESPONSE;
  LatencyParts parts;              // annotated: what the transaction's time was spent on
  Timeline timeline;               // arbitrated: the same, in order, begun by request()
};

// A cache's answer to the question what it would do about a transaction. Nothing changes by asking.
struct SnoopAnswer {
  bool survives = false;           // it will still hold the line: it raises the shared line
  bool owner = false;
  bool supplies = false;
  bool write_memory = false;       // memory takes the supplied line in the same transaction
  const std::uint8_t* line_data = nullptr;  // the copy; valid until the cache changes
};

struct SnoopingBusTypes {  // the traits of the cache-to-bus sockets
  using tlm_payload_type = BusTransaction;
  using tlm_phase_type = tlm::tlm_phase;
};

// Forward, from a cache to the bus. acquire(), transact() and pass_through() are for annotated timing: call them from
// a simulation process; they may wait() if another process holds the bus or a target of the bus waits.
class RequestInterface : public virtual sc_core::sc_interface {
 public:
  using protocol_types = SnoopingBusTypes;

  // The grant: between acquire() and release() no other transaction takes effect, so what a cache decides
  // there about its copy stays true. Returns whether it had to wait().
  virtual bool acquire() = 0;
  virtual void release() = 0;
  // REQUIRES: the bus is held. Carries the transaction out, atomically unless a target waits; adds its time to
  // `delay`. On a status other than TLM_OK_RESPONSE nothing has changed in any cache.
  virtual void transact(BusTransaction& transaction, sc_core::sc_time& delay) = 0;
  // REQUIRES: annotated timing, the bus is held. If the requester has lost its copy of the line to a transaction whose
  // grant comes after `time`: the line as another cache holds it now. Null: it has not, or nobody holds it.
  virtual const std::uint8_t* copy_before_loss(int requester, std::uint64_t line, Picoseconds time) const = 0;
  // An access to an uncached window: passed to the window's target as it is, address translated.
  virtual void pass_through(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay, LatencyParts& parts) = 0;

  // Arbitrated timing: queues the transaction and returns. The requester then hears, never from within this call,
  //   granted()   at its grant, with the bus its own: say what is needed now, or that nothing is;
  //   effected()  unless it fails, when it takes effect: at the grant, if no memory is asked for data; a fetch or an I/O
  //               read from memory, when its last beat has come; a write_through, when memory has taken the word. An I/O
  //               write always at its grant, and it may fail after that;
  //   finished()  when it has its last beat, or memory has the written data;
  //   settled()   when memory has all that belongs to the line and the next transaction for the line may be granted.
  // A requester has at most one transaction for a line queued or under way.
  virtual void request(BusTransaction& transaction) = 0;
  // Whether a transaction for the line is under way: granted, not yet settled().
  virtual bool in_flight(std::uint64_t line) const = 0;

  // The line of the caches on the bus. From the bus's end of elaboration on.
  virtual unsigned line_bytes() const = 0;
  // The cache dropped its copy without a transaction (host bookkeeping; no modelled signal).
  virtual void dropped(int requester, std::uint64_t line) = 0;
  // Coherent debug access, no time, no state change: the owner's bytes, else memory's; writes reach every copy
  // and memory. Returns the number of bytes done.
  virtual unsigned debug(tlm::tlm_generic_payload& payload) = 0;
  // Granted for uncached windows whose target grants it.
  virtual bool direct_memory(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) = 0;
};

// Backward, from the bus to a cache. Never waits.
class SnoopInterface : public virtual sc_core::sc_interface {
 public:
  using protocol_types = SnoopingBusTypes;

  // Once, at the bus's end of elaboration. `map` lives as long as the bus. Returns the cache's line in bytes; 0
  // from an I/O port, which has none.
  virtual unsigned attached(int port, const AddressMap& map, BusTiming timing) = 0;
  virtual bool serves_io() const = 0;  // whether its protocol knows of I/O ports
  virtual SnoopAnswer ask(const BusTransaction& transaction) = 0;
  // Changes state as the protocol says and takes the broadcast bytes. Returns whether the copy survives.
  virtual bool commit(const BusTransaction& transaction) = 0;

  // To the requester, arbitrated timing: see RequestInterface::request(). None of them waits.
  // granted() judges the request in the state the line is in now and fills in the transaction; false: nothing needs
  // the bus any more, the transaction is over.
  virtual bool granted(BusTransaction& transaction) = 0;
  virtual void effected(BusTransaction& transaction) = 0;
  virtual void finished(BusTransaction& transaction) = 0;  // look at the status
  virtual void settled(std::uint64_t line) = 0;
  // One line for each thing the cache still waits for; empty if nothing. For the report of a stall.
  virtual std::string waiting() const = 0;
  // The cache's copy of a line, or null; `owner` tells whether memory may be older. For debug access.
  virtual std::uint8_t* copy_of(std::uint64_t line, bool& owner) = 0;
  virtual void invalidate_direct_memory(std::uint64_t first, std::uint64_t last) = 0;
};

// The two sockets. One bind() joins both directions: cache.bus_socket.bind(bus.cache_socket).
using BusInitiatorSocket = tlm::tlm_base_initiator_socket<32, RequestInterface, SnoopInterface>;
// Any number of caches; the bus tells each its port, in binding order.
using BusTargetSocket =
    tlm::tlm_base_target_socket<32, RequestInterface, SnoopInterface, 0, sc_core::SC_ONE_OR_MORE_BOUND>;

}  // namespace earshot
