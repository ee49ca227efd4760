// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Arbitrated timing of the CoherentCache: its misses and its victims, between the bus's callbacks.
#include <algorithm>
#include <cstring>

#include "earshot/cache/arbitrated_cache.h"

namespace earshot {

bool CoherentCache::Arbitrated::granted(BusTransaction& transaction) {
  Job& job = static_cast<Job&>(transaction);
  if (job.what == Job::What::write_back) return write_back_granted(static_cast<WriteBack&>(job));
  return judge(static_cast<Miss&>(job));
}

void CoherentCache::Arbitrated::finished(BusTransaction& transaction) {
  Job& job = static_cast<Job&>(transaction);
  switch (job.what) {
    case Job::What::miss:
      miss_finished(static_cast<Miss&>(job));
      return;
    case Job::What::write_back:
      write_back_finished(static_cast<WriteBack&>(job));
      return;
    case Job::What::uncached:
      finish_uncached(static_cast<Uncached&>(job));
  }
}

// ---- Misses

CoherentCache::Arbitrated::Miss* CoherentCache::Arbitrated::find_miss(std::uint64_t line) const {
  for (Miss* miss : in_use_)
    if (miss->line == line) return miss;
  return nullptr;
}

CoherentCache::Arbitrated::Miss& CoherentCache::Arbitrated::new_miss(Access& first, Slot* place) {
  Miss& miss = *unused_misses_.back();
  unused_misses_.pop_back();
  in_use_.push_back(&miss);
  miss.line = first.piece.line;
  miss.place = place;
  if (place != nullptr) place->pinned = true;
  miss.performed = false;
  miss.follows_up = false;
  miss.since = now_ps();
  miss.chain.push_back(&first);
  miss_meter_.enter(miss.since);
  return miss;
}

// The bus is granted: what the table says for the state the line is in now. False: the bus is not needed.
bool CoherentCache::Arbitrated::judge(Miss& miss) {
  charge(miss);
  while (!miss.chain.empty() && miss.chain.front()->payload == nullptr) {  // nobody waits for it any more
    Access& access = *miss.chain.front();
    miss.chain.pop_front();
    complete(access);
  }
  if (miss.chain.empty()) {
    release(miss);
    return false;
  }
  Access& access = *miss.chain.front();
  const Event event = access.write ? Event::write : Event::read;
  Slot* const slot = cache_.store_.find(miss.line);
  miss.judged = slot == nullptr ? absent : slot->state;
  const Row& row = cache_.table_->row(miss.judged, event, false);
  if (!row.defined) cache_.no_row(miss.judged, event, miss.line);
  if (!row.uses_bus) {
    cache_.set_state(*slot, miss.line, row.next);
    perform(access, slot, cache_.store_.bytes(*slot));
    miss.performed = true;
    advance(miss);
    return false;
  }
  miss.kind = row.bus;
  miss.line_data = miss.buffer.data();
  miss.offset = access.piece.offset;
  miss.length = access.piece.length;
  miss.word = access.piece.data;
  miss.byte_enable = access.piece.byte_enable;
  miss.supplier = Supplier::none;
  return true;
}

void CoherentCache::Arbitrated::effected(BusTransaction& transaction) {
  Miss& miss = static_cast<Miss&>(transaction);
  Access& access = *miss.chain.front();
  const Row& row = cache_.table_->row(miss.judged, access.write ? Event::write : Event::read, miss.shared);
  const bool fetched = miss.kind == BusKind::read || miss.kind == BusKind::read_exclusive;
  Slot* const slot = miss.place;
  std::uint8_t* bytes = miss.buffer.data();
  if (slot != nullptr) {
    bytes = cache_.store_.bytes(*slot);
    if (fetched) {
      cache_.store_.fill(*slot, miss.line);
      std::memcpy(bytes, miss.buffer.data(), miss.buffer.size());
    }
    cache_.set_state(*slot, miss.line, row.next);
  }
  if (row.again) return;
  miss.performed = true;
  if (miss.kind == BusKind::write_through) {  // the requester's own copy takes what memory and the others took
    access.piece.data = const_cast<std::uint8_t*>(miss.word);
    if (slot != nullptr && slot->state != absent) cache_.store_.touch(*slot);
    cache_.perform(access.piece, bytes);
  } else {
    perform(access, slot, bytes);
  }
}

// Every access has waited for what the transaction's time went into since it joined.
void CoherentCache::Arbitrated::charge(Miss& miss) {
  for (Access* access : miss.chain) {
    access->progress.parts.add(miss.timeline.since(access->accounted));
    access->accounted = now_ps();
  }
}

void CoherentCache::Arbitrated::miss_finished(Miss& miss) {
  const AccessKind kind = kind_of(miss);
  const bool fetched = miss.kind == BusKind::read || miss.kind == BusKind::read_exclusive;
  charge(miss);
  for (Access* access : miss.chain) {
    if (fetched || access == miss.chain.front()) access->progress.kind = std::max(access->progress.kind, kind);
    if (fetched) access->progress.hit = false;
  }
  if (miss.status != tlm::TLM_OK_RESPONSE) {
    miss.chain.front()->progress.status = miss.status;
    miss.performed = true;
  }
  advance(miss);
}

// The first access is done, if it has been performed; the next ones follow as far as they need no bus.
void CoherentCache::Arbitrated::advance(Miss& miss) {
  miss.follows_up = !miss.performed;
  for (;;) {
    if (miss.performed) {
      miss.performed = false;
      Access& access = *miss.chain.front();
      miss.chain.pop_front();
      miss.follows_up = false;
      next_piece(access);
    }
    if (miss.chain.empty()) {
      release(miss);
      return;
    }
    Access& access = *miss.chain.front();
    const Event event = access.write ? Event::write : Event::read;
    Slot* const slot = cache_.store_.find(miss.line);
    const StateId state = slot == nullptr ? absent : slot->state;
    const Row& row = cache_.table_->row(state, event, false);
    if (row.uses_bus && miss.place == nullptr && row.bus <= BusKind::read_exclusive) {
      start_over(miss);
      return;
    }
    if (row.uses_bus || slot == nullptr) break;
    cache_.set_state(*slot, miss.line, row.next);
    perform(access, slot, cache_.store_.bytes(*slot));
    miss.performed = true;
  }
  cache_.bus_socket->request(miss);
}

// The accesses that joined a miss without a place need one.
void CoherentCache::Arbitrated::start_over(Miss& miss) {
  for (; !miss.chain.empty(); miss.chain.pop_back()) {
    miss.chain.back()->queued = now_ps();
    access_meter_.enter(now_ps());
    waiting_.push_front(miss.chain.back());
  }
  release(miss);
}

void CoherentCache::Arbitrated::release(Miss& miss) {
  if (miss.place != nullptr) miss.place->pinned = false;
  miss_meter_.leave(now_ps(), miss.since);
  in_use_.erase(std::find(in_use_.begin(), in_use_.end(), &miss));
  unused_misses_.push_back(&miss);
  retry();
}

// ---- Victims

bool CoherentCache::Arbitrated::owned(const Slot& slot) const {
  return slot.state != absent && cache_.table_->row(slot.state, Event::replace, false).uses_bus;
}

CoherentCache::Arbitrated::WriteBack* CoherentCache::Arbitrated::free_slot() const {
  for (const auto& victim : victims_)
    if (!victim->used) return victim.get();
  return nullptr;
}

// Memory has refused what is in every slot: none will become free by itself.
bool CoherentCache::Arbitrated::slots_lost() const {
  return std::all_of(victims_.begin(), victims_.end(),
                     [](const auto& victim) { return victim->used && victim->refused; });
}

// A refused victim that another cache has come to own, or has overwritten, is rid of.
void CoherentCache::Arbitrated::snooped(std::uint64_t line) {
  for (const auto& victim : victims_) {
    if (!victim->used || victim->line != line || !victim->refused || owned(victim->slot)) continue;
    cache_.set_state(victim->slot, line, absent);
    release(*victim);
  }
}

Slot* CoherentCache::Arbitrated::leaving(std::uint64_t line, std::uint8_t*& bytes) {
  for (const auto& victim : victims_) {
    if (!victim->used || victim->line != line) continue;
    bytes = victim->bytes.data();
    return &victim->slot;
  }
  return nullptr;
}

const Slot* CoherentCache::Arbitrated::leaving(std::uint64_t line) const {
  for (const auto& victim : victims_)
    if (victim->used && victim->line == line) return &victim->slot;
  return nullptr;
}

std::uint8_t* CoherentCache::Arbitrated::in_flight(std::uint64_t line, bool& owner) {
  owner = true;
  for (const auto& victim : victims_)  // granted: no longer in any state, and memory may not have it yet
    if (victim->used && victim->line == line && victim->slot.state == absent) return victim->bytes.data();
  owner = false;
  const Miss* const miss = find_miss(line);
  return miss != nullptr && cache_.store_.find(line) == nullptr ? const_cast<Miss*>(miss)->buffer.data() : nullptr;
}

std::uint64_t CoherentCache::Arbitrated::owned_victims() const {
  return static_cast<std::uint64_t>(
      std::count_if(victims_.begin(), victims_.end(), [](const auto& victim) { return victim->used; }));
}

// Takes an occupied slot's line out of the store: an owned one into a write-back slot. REQUIRES: there is a free one.
void CoherentCache::Arbitrated::depart(Slot& slot) {
  const std::uint64_t line = slot.line;
  const Row& row = cache_.table_->row(slot.state, Event::replace, false);
  if (!row.defined) cache_.no_row(slot.state, Event::replace, line);
  if (!row.uses_bus) {
    drop(slot, line);
    return;
  }
  WriteBack& victim = *free_slot();
  victim.used = true;
  victim.refused = false;
  victim.slot = slot;
  victim.slot.pinned = false;
  victim.line = line;
  victim.since = now_ps();
  victim_meter_.enter(victim.since);
  std::memcpy(victim.bytes.data(), cache_.store_.bytes(slot), victim.bytes.size());
  cache_.store_.clear(slot);
  cache_.bus_socket->request(victim);
}

// A copy goes without a transaction.
void CoherentCache::Arbitrated::drop(Slot& slot, std::uint64_t line) {
  cache_.set_state(slot, line, absent);
  cache_.bus_socket->dropped(cache_.port_, line);
  if (cache_.observer_ != nullptr && !cache_.bus_socket->in_flight(line)) cache_.observer_->settled(line);
}

bool CoherentCache::Arbitrated::write_back_granted(WriteBack& victim) {
  const StateId state = victim.slot.state;
  if (state != absent && cache_.table_->row(state, Event::replace, false).uses_bus) {
    victim.kind = BusKind::write_back;
    victim.line_data = victim.bytes.data();
    victim.before = state;
    cache_.set_state(victim.slot, victim.line, absent);
    return true;
  }
  if (state != absent) drop(victim.slot, victim.line);  // somebody else has become its owner
  release(victim);
  return false;
}

void CoherentCache::Arbitrated::write_back_finished(WriteBack& victim) {
  if (victim.status == tlm::TLM_OK_RESPONSE) {
    release(victim);
    return;
  }
  victim.refused = true;
  victim.slot.line = victim.line;
  cache_.set_state(victim.slot, victim.line, victim.before);
  retry();  // those that wait for the slot wait in vain
  SC_REPORT_ERROR("/earshot/cache/memory",
                  (std::string(cache_.name()) + ": memory refuses the write-back of a line; it stays in its slot").c_str());
}

void CoherentCache::Arbitrated::release(WriteBack& victim) {
  victim.used = false;
  victim_meter_.leave(now_ps(), victim.since);
  retry();
}

// ---- Giving up lines on request

void CoherentCache::Arbitrated::wait_for_change() {
  ++change_waiters_;
  sc_core::wait(changed_);
  --change_waiters_;
}

void CoherentCache::Arbitrated::replace(std::uint64_t line) {
  for (;; wait_for_change()) {
    Slot* const slot = cache_.store_.find(line);
    if (find_miss(line) == nullptr && slot == nullptr) return;
    if (find_miss(line) != nullptr) continue;
    if (owned(*slot) && slots_lost()) return;
    if (owned(*slot) && free_slot() == nullptr) continue;
    depart(*slot);
    return;
  }
}

std::uint64_t CoherentCache::Arbitrated::flush(sc_core::sc_time& delay) {
  if (delay != sc_core::SC_ZERO_TIME) sc_core::wait(delay);
  delay = sc_core::SC_ZERO_TIME;
  for (std::size_t i = 0; i < cache_.store_.slots().size(); ++i)
    if (const Slot& slot = cache_.store_.slots()[i]; slot.pinned || slot.state != absent) {
      while (slot.pinned || (owned(slot) && free_slot() == nullptr && !slots_lost())) wait_for_change();
      if (slot.state != absent && !(owned(slot) && slots_lost())) depart(cache_.store_.slots()[i]);
    }
  while (std::any_of(victims_.begin(), victims_.end(),
                     [](const auto& victim) { return victim->used && !victim->refused; }))
    wait_for_change();
  return cache_.owned_lines();
}

}  // namespace earshot
