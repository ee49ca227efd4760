// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Annotated timing of the CoherentCache.
#include <algorithm>
#include <cstring>

#include "earshot/bus/held_bus.h"
#include "earshot/cache/coherent_cache.h"

namespace earshot {
namespace {

constexpr const char* memory_id = "/earshot/cache/memory";

}  // namespace

// An owned victim between leave() and the end of its write-back. Unless that is done it comes back: if memory
// refuses, and also if a target throws or the process is killed while a target waits.
class CoherentCache::Departure {
 public:
  Departure(CoherentCache& cache, Slot& slot, bool owed, const Slot& before)
      : cache_(cache), slot_(slot), before_(before), owed_(owed) {}
  ~Departure() {
    if (owed_) cache_.come_back(slot_, before_);
  }
  Departure(const Departure&) = delete;
  Departure& operator=(const Departure&) = delete;
  bool owed() const { return owed_; }
  void done() { owed_ = false; }

 private:
  CoherentCache& cache_;
  Slot& slot_;
  Slot before_;
  bool owed_;
};

// A line being fetched: debug accesses reach it while the target waits.
class CoherentCache::Arrival {
 public:
  Arrival(CoherentCache& cache, std::uint64_t line) : cache_(cache) { cache_.incoming_line_ = line; }
  ~Arrival() { cache_.incoming_line_ = ~std::uint64_t{0}; }
  Arrival(const Arrival&) = delete;
  Arrival& operator=(const Arrival&) = delete;

 private:
  CoherentCache& cache_;
};

void CoherentCache::access(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  payload.set_dmi_allowed(false);
  Progress progress;
  progress.delay = delay;
  switch (request_of(payload, *map_)) {
    case AccessRequest::nothing:
      payload.set_response_status(tlm::TLM_OK_RESPONSE);
      return;
    case AccessRequest::uncached:
      bus_socket->pass_through(payload, delay, progress.parts);
      ++(payload.is_response_ok() ? totals_.uncached : totals_.errors);
      return;
    case AccessRequest::no_data:
      progress.status = tlm::TLM_BURST_ERROR_RESPONSE;
      break;
    case AccessRequest::no_window:
      progress.status = tlm::TLM_ADDRESS_ERROR_RESPONSE;
      break;
    case AccessRequest::cached: {
      Pieces pieces = pieces_of(payload);
      for (Piece piece; progress.status == tlm::TLM_OK_RESPONSE && pieces.next(piece);) access_line(piece, progress);
      delay = progress.delay;
    }
  }
  payload.set_response_status(progress.status);
  count(payload.is_write(), progress);
}

void CoherentCache::access_line(const Piece& piece, Progress& progress) {
  progress.delay += hit_time_;
  progress.parts[LatencyPart::hit] += hit_ps_;

  const HeldBus held(*bus_socket.operator->(), progress.delay, progress.parts[LatencyPart::wait_for_grant]);
  if (!hit_before_loss(piece, progress)) judge(piece, progress);
  last_end_ = now_ps() + to_ps(progress.delay);
  if (observer_ != nullptr) observer_->settled(piece.line);
}

// A read at a time before the grant of the transaction that has taken the copy: the copy would still have been there,
// so it costs a hit. What it reads is the line's value now. An initiator that lets no time pass for its accesses has no
// such time: for it, what is lost is lost.
bool CoherentCache::hit_before_loss(const Piece& piece, const Progress& progress) {
  const Picoseconds looked_up = now_ps() + to_ps(progress.delay) - hit_ps_;
  if (piece.write || looked_up < last_end_ || store_.find(piece.line) != nullptr) return false;
  const std::uint8_t* const copy = bus_socket->copy_before_loss(port_, piece.line, looked_up);
  if (copy == nullptr) return false;
  std::memcpy(incoming_.data(), copy, incoming_.size());
  perform(piece, incoming_.data());
  return true;
}

// Does what the table says for the state the line is in now, until the access is done.
void CoherentCache::judge(const Piece& piece, Progress& progress) {
  const Event event = piece.write ? Event::write : Event::read;
  Slot* slot = store_.find(piece.line);
  if (slot == nullptr || !table_->state(slot->state).readable) progress.hit = false;

  for (bool again = true; again;) {
    const StateId state = slot == nullptr ? absent : slot->state;
    const Row& row = table_->row(state, event, false);
    if (!row.defined) no_row(state, event, piece.line);
    if (!row.uses_bus) {
      if (slot != nullptr) set_state(*slot, piece.line, row.next);
      break;
    }
    BusTransaction transaction;
    transaction.kind = row.bus;
    transaction.requester = port_;
    transaction.line = piece.line;
    if (row.bus == BusKind::read || row.bus == BusKind::read_exclusive) {
      fetch(piece, transaction, progress, slot);
    } else {
      transaction.offset = piece.offset;
      transaction.length = piece.length;
      transaction.word = piece.data;
      transaction.byte_enable = piece.byte_enable;
      bus_socket->transact(transaction, progress.delay);
    }
    progress.parts.add(transaction.parts);
    progress.status = transaction.status;
    if (progress.status != tlm::TLM_OK_RESPONSE) return;
    progress.kind = std::max(progress.kind, kind_of(transaction));

    const Row& granted = table_->row(state, event, transaction.shared);
    if (slot != nullptr) set_state(*slot, piece.line, granted.next);
    again = granted.again;
  }
  if (slot != nullptr && slot->state != absent) store_.touch(*slot);
  perform(piece, slot == nullptr ? incoming_.data() : store_.bytes(*slot));
}

// Fetches the line and places it, not yet in any state. The victim's write-back is asked for behind the fetch, and
// the access does not wait for it. If either is refused, nothing is cached and an owned victim is back in its place.
void CoherentCache::fetch(const Piece& piece, BusTransaction& transaction, Progress& progress, Slot*& slot) {
  Slot& place = slot != nullptr ? *slot : *store_.victim(piece.line);
  const Slot victim = place;
  Departure departure(*this, place, slot == nullptr && victim.state != absent && leave(place), victim);

  const Picoseconds requested = now_ps() + to_ps(progress.delay);
  transaction.line_data = incoming_.data();
  {
    const Arrival arrival(*this, piece.line);
    bus_socket->transact(transaction, progress.delay);
  }
  if (departure.owed() && transaction.status == tlm::TLM_OK_RESPONSE) {
    const Picoseconds now = now_ps();
    sc_core::sc_time unattended = from_ps(requested > now ? requested - now : 0);
    transaction.status = write_back(victim.line, leaving_, unattended);
    if (transaction.status != tlm::TLM_OK_RESPONSE) surrender(piece, transaction, unattended);
  }
  if (transaction.status != tlm::TLM_OK_RESPONSE) return;
  departure.done();
  if (slot == nullptr) store_.fill(place, piece.line);
  slot = &place;
  std::memcpy(store_.bytes(place), incoming_.data(), incoming_.size());
}

// The line just fetched cannot be placed: it goes as a replacement would take it.
void CoherentCache::surrender(const Piece& piece, const BusTransaction& transaction, sc_core::sc_time& delay) {
  const StateId held = table_->row(absent, piece.write ? Event::write : Event::read, transaction.shared).next;
  bus_socket->dropped(port_, piece.line);
  if (table_->state(held).owner && write_back(piece.line, incoming_, delay) != tlm::TLM_OK_RESPONSE)
    SC_REPORT_ERROR(memory_id, (std::string(name()) + ": memory refuses write-backs of lines it let be read").c_str());
}

// ---- Replacement

// Takes an occupied slot's line out of the store. True: it is owned, stands in the write-back slot, and memory is
// still owed it. False: it is gone.
bool CoherentCache::leave(Slot& slot) {
  const Slot before = slot;
  const Row& row = table_->row(before.state, Event::replace, false);
  if (!row.defined) no_row(before.state, Event::replace, before.line);
  if (row.uses_bus) {
    leaving_line_ = before.line;
    std::memcpy(leaving_.data(), store_.bytes(slot), leaving_.size());
  }
  set_state(slot, before.line, absent);
  if (row.uses_bus) return true;
  bus_socket->dropped(port_, before.line);
  if (observer_ != nullptr) observer_->settled(before.line);
  return false;
}

// Undoes leave() for an owned line.
void CoherentCache::come_back(Slot& slot, const Slot& before) {
  slot = before;
  slot.state = absent;
  std::memcpy(store_.bytes(slot), leaving_.data(), leaving_.size());
  set_state(slot, before.line, before.state);
  leaving_line_ = ~std::uint64_t{0};
}

tlm::tlm_response_status CoherentCache::write_back(std::uint64_t line, std::vector<std::uint8_t>& bytes,
                                                   sc_core::sc_time& delay) {
  BusTransaction transaction;
  transaction.kind = BusKind::write_back;
  transaction.requester = port_;
  transaction.line = line;
  transaction.line_data = bytes.data();
  bus_socket->transact(transaction, delay);
  if (transaction.status != tlm::TLM_OK_RESPONSE) return transaction.status;
  leaving_line_ = ~std::uint64_t{0};
  if (observer_ != nullptr) observer_->settled(line);
  return tlm::TLM_OK_RESPONSE;
}

// Writes an occupied slot's line back if it is owned, else drops it. If memory refuses, it stays.
tlm::tlm_response_status CoherentCache::give_up(Slot& slot, sc_core::sc_time& delay) {
  const Slot before = slot;
  Departure departure(*this, slot, leave(slot), before);
  if (!departure.owed()) return tlm::TLM_OK_RESPONSE;
  const tlm::tlm_response_status status = write_back(before.line, leaving_, delay);
  if (status == tlm::TLM_OK_RESPONSE) departure.done();
  return status;
}

tlm::tlm_response_status CoherentCache::replace_now(std::uint64_t address, const sc_core::sc_time& delay) {
  sc_core::sc_time unattended = delay;
  Picoseconds wait = 0;
  const HeldBus held(*bus_socket.operator->(), unattended, wait);
  Slot* const slot = store_.find(store_.line_of(address));
  return slot == nullptr ? tlm::TLM_OK_RESPONSE : give_up(*slot, unattended);
}

std::uint64_t CoherentCache::flush_now(sc_core::sc_time& delay) {
  std::uint64_t refused = 0;
  Picoseconds wait = 0;
  const HeldBus held(*bus_socket.operator->(), delay, wait);
  for (Slot& slot : store_.slots()) {
    if (slot.state == absent) continue;
    if (give_up(slot, delay) != tlm::TLM_OK_RESPONSE) ++refused;
  }
  return refused;
}

}  // namespace earshot
