// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The processor side: accesses and their phases, lookup, and what waits. Misses and victims: cache_misses.cpp.
#include "earshot/cache/arbitrated_cache.h"

#include <algorithm>
#include <sstream>

#include "earshot/cache/socket_peer.h"

namespace earshot {

CoherentCache::Arbitrated::Arbitrated(CoherentCache& cache) : cache_(cache), agenda_(cache.agenda_) {
  for (unsigned i = 0; i < cache.config_.write_back_slots; ++i) {
    victims_.push_back(std::make_unique<WriteBack>());
    victims_.back()->what = Job::What::write_back;
    victims_.back()->requester = cache.port_;
    victims_.back()->bytes.resize(cache.store_.line_bytes());
  }
  for (unsigned i = 0; i < cache.config_.misses; ++i) {
    misses_.push_back(std::make_unique<Miss>());
    misses_.back()->requester = cache.port_;
    misses_.back()->buffer.resize(cache.store_.line_bytes());
    unused_misses_.push_back(misses_.back().get());
  }
}

// ---- Accesses and their phases

CoherentCache::Arbitrated::Access& CoherentCache::Arbitrated::start(tlm::tlm_generic_payload& payload, bool blocking,
                                                                    AccessRequest request, Picoseconds when) {
  if (unused_accesses_.empty()) {
    accesses_.push_back(std::make_unique<Access>());
    unused_accesses_.push_back(accesses_.back().get());
  }
  Access& access = *unused_accesses_.back();
  unused_accesses_.pop_back();
  access.payload = &payload;
  access.blocking = blocking;
  access.done = false;
  access.write = payload.is_write();
  access.request = request;
  access.pieces = Pieces{};
  access.start = access.accounted = when;
  access.progress = Progress{};
  return access;
}

void CoherentCache::Arbitrated::recycle(Access& access) { unused_accesses_.push_back(&access); }

void CoherentCache::Arbitrated::block(tlm::tlm_generic_payload& payload, AccessRequest request) {
  // A killed process takes its payload with it: what is under way for it goes on without.
  struct Caller {
    Arbitrated& engine;
    Access& access;
    ~Caller() {
      access.payload = nullptr;
      if (access.done) engine.recycle(access);
    }
  } caller{*this, start(payload, true, request, now_ps() - lookup_time(request))};
  look_up(&caller.access);
  while (!caller.access.done) sc_core::wait(done_);
}

tlm::tlm_sync_enum CoherentCache::Arbitrated::forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                      sc_core::sc_time& time) {
  if (phase > tlm::END_RESP) return tlm::TLM_ACCEPTED;  // an ignorable phase of somebody's own (15.2.5)
  if (phase == tlm::BEGIN_REQ) {
    if (requesting_ != nullptr) return misuse("BEGIN_REQ before the END_REQ of its last request");
    if (std::find(non_blocking_.begin(), non_blocking_.end(), &payload) != non_blocking_.end())
      return misuse("BEGIN_REQ with a payload that is still in flight");
    if (payload.has_mm()) payload.acquire();
    non_blocking_.push_back(&payload);
    const Picoseconds when = now_ps() + to_ps(time);
    const AccessRequest request = request_of(payload, *cache_.map_);
    Access& access = start(payload, false, request, when);
    requesting_ = &access;
    agenda_.at<&Arbitrated::look_up>(when + lookup_time(request), this, &access);
    return tlm::TLM_ACCEPTED;
  }
  if (phase == tlm::END_RESP) {
    if (responding_ == nullptr || responding_->payload != &payload || response_ending_)
      return misuse("END_RESP for an access that has no BEGIN_RESP outstanding");
    end_response(time);
    // Not from within this call (11.1.2.4: a call on one path never leads to one on the other).
    if (!responses_.empty()) agenda_.at<&Arbitrated::next_response>(now_ps(), this, this);
    return tlm::TLM_COMPLETED;
  }
  std::ostringstream text;
  text << "phase " << phase << " on the forward path; expected BEGIN_REQ or END_RESP";
  return misuse(text.str());
}

tlm::tlm_sync_enum CoherentCache::Arbitrated::misuse(const std::string& what) const {
  SC_REPORT_ERROR("/earshot/cache/protocol",
                  (std::string(cache_.name()) + ": initiator " + initiators_of(cache_.cpu_socket) + " sends " + what +
                   " (IEEE 1666-2011, 15.2, base protocol)")
                      .c_str());
  return tlm::TLM_ACCEPTED;
}

void CoherentCache::Arbitrated::look_up(Access* access) {
  access->progress.parts[LatencyPart::hit] += lookup_time(access->request);
  access->accounted += lookup_time(access->request);
  if (access->piece.length == 0)
    begin(*access);
  else
    settle_in(*access);
}

// The access's first lookup.
void CoherentCache::Arbitrated::begin(Access& access) {
  tlm::tlm_generic_payload& payload = *access.payload;
  payload.set_dmi_allowed(false);
  switch (access.request) {
    case AccessRequest::nothing:
      complete(access);
      return;
    case AccessRequest::no_data:
      access.progress.status = tlm::TLM_BURST_ERROR_RESPONSE;
      complete(access);
      return;
    case AccessRequest::no_window:
      access.progress.status = tlm::TLM_ADDRESS_ERROR_RESPONSE;
      complete(access);
      return;
    case AccessRequest::uncached:
      begin_uncached(access);
      return;
    case AccessRequest::cached:
      access.pieces = cache_.pieces_of(payload);
      if (access.pieces.next(access.piece))
        settle_in(access);
      else
        complete(access);
  }
}

void CoherentCache::Arbitrated::begin_uncached(Access& access) {
  if (unused_uncached_.empty()) {
    uncached_.push_back(std::make_unique<Uncached>());
    uncached_.back()->what = Job::What::uncached;
    uncached_.back()->requester = cache_.port_;
    unused_uncached_.push_back(uncached_.back().get());
  }
  Uncached& job = *unused_uncached_.back();
  unused_uncached_.pop_back();
  job.access = &access;
  tlm::tlm_generic_payload& payload = *access.payload;
  job.kind = payload.is_write() ? BusKind::io_write : BusKind::io_read;
  job.line = payload.get_address();
  job.io = &payload;
  if (access.blocking) {
    job.data.resize(payload.get_data_length());
    job.enables.resize(payload.get_byte_enable_ptr() == nullptr ? 0 : payload.get_byte_enable_length());
    job.copy.set_data_ptr(job.data.data());
    job.copy.set_byte_enable_ptr(job.enables.empty() ? nullptr : job.enables.data());
    job.copy.deep_copy_from(payload);
    job.io = &job.copy;
  }
  end_request(access);
  cache_.bus_socket->request(job);
}

void CoherentCache::Arbitrated::finish_uncached(Uncached& job) {
  Access& access = *job.access;
  access.progress.parts.add(job.timeline.since(access.accounted));
  access.progress.status = job.status;
  if (access.blocking) {
    if (access.payload != nullptr) access.payload->update_original_from(job.copy);
    job.copy.free_all_extensions();
  }
  unused_uncached_.push_back(&job);
  complete(access);
}

void CoherentCache::Arbitrated::next_piece(Access& access) {
  if (access.progress.status == tlm::TLM_OK_RESPONSE && access.payload != nullptr && access.pieces.next(access.piece))
    agenda_.at<&Arbitrated::look_up>(now_ps() + cache_.hit_ps_, this, &access);
  else
    complete(access);
}

void CoherentCache::Arbitrated::complete(Access& access) {
  access.piece.length = 0;
  if (access.progress.parts.total() != now_ps() - access.start) ++parts_wrong_;
  if (access.request == AccessRequest::uncached)
    ++(access.progress.status == tlm::TLM_OK_RESPONSE ? cache_.totals_.uncached : cache_.totals_.errors);
  else if (access.request != AccessRequest::nothing)
    cache_.count(access.write, access.progress);
  if (access.payload != nullptr) access.payload->set_response_status(access.progress.status);
  access.done = true;
  if (!access.blocking) {
    responses_.push_back(&access);
    next_response(this);
  } else if (access.payload == nullptr) {
    recycle(access);
  } else {
    done_.notify();
  }
}

void CoherentCache::Arbitrated::next_response(Arbitrated*) {
  if (responding_ == nullptr && !responses_.empty()) send_response();
}

void CoherentCache::Arbitrated::send_response() {
  responding_ = responses_.front();
  responses_.pop_front();
  Access& access = *responding_;
  if (requesting_ == &access) requesting_ = nullptr;  // BEGIN_RESP implies END_REQ
  tlm::tlm_phase phase = tlm::BEGIN_RESP;
  sc_core::sc_time time;
  const tlm::tlm_sync_enum answer = cache_.cpu_socket->nb_transport_bw(*access.payload, phase, time);
  if (answer == tlm::TLM_ACCEPTED) return;  // END_RESP comes, or came within the call
  if (responding_ != &access || response_ending_) {
    misuse("an answer to BEGIN_RESP other than TLM_ACCEPTED after END_RESP");
    return;
  }
  if (answer == tlm::TLM_UPDATED && phase != tlm::END_RESP) {
    misuse("TLM_UPDATED in answer to BEGIN_RESP with a phase other than END_RESP");
    return;
  }
  end_response(time);
  next_response(this);
}

void CoherentCache::Arbitrated::end_response(const sc_core::sc_time& time) {
  response_ending_ = true;
  if (time == sc_core::SC_ZERO_TIME)
    response_ended(responding_);
  else
    agenda_.at<&Arbitrated::response_ended_later>(now_ps() + to_ps(time), this, responding_);
}

void CoherentCache::Arbitrated::response_ended_later(Access* access) {
  response_ended(access);
  next_response(this);
}

void CoherentCache::Arbitrated::response_ended(Access* access) {
  tlm::tlm_generic_payload& payload = *access->payload;
  const auto place = std::find(non_blocking_.begin(), non_blocking_.end(), &payload);
  *place = non_blocking_.back();
  non_blocking_.pop_back();
  responding_ = nullptr;
  response_ending_ = false;
  recycle(*access);
  if (payload.has_mm()) payload.release();
}

// The access has its place, in its last line: the initiator may send the next one, which cannot pass it.
void CoherentCache::Arbitrated::end_request(Access& access) {
  if (requesting_ != &access || !access.pieces.last()) return;
  requesting_ = nullptr;
  tlm::tlm_phase phase = tlm::END_REQ;
  sc_core::sc_time time;
  if (cache_.cpu_socket->nb_transport_bw(*access.payload, phase, time) != tlm::TLM_ACCEPTED)
    misuse("an answer to END_REQ other than TLM_ACCEPTED");
}

// ---- Lookup

// Finds the access's place, or lets it wait behind every earlier one that waits with the same line.
void CoherentCache::Arbitrated::settle_in(Access& access) {
  const bool behind = std::any_of(waiting_.begin(), waiting_.end(),
                                  [&](const Access* other) { return other->piece.line == access.piece.line; });
  if (!behind && admit(access)) return;
  access.queued = now_ps();
  access_meter_.enter(access.queued);
  waiting_.push_back(&access);
}

bool CoherentCache::Arbitrated::admit(Access& access) {
  const std::uint64_t line = access.piece.line;
  LineStore& store = cache_.store_;
  Slot* const slot = store.find(line);
  if (slot == nullptr || !cache_.table_->state(slot->state).readable) access.progress.hit = false;
  if (Miss* const miss = find_miss(line); miss != nullptr) {
    charge_wait(access);
    miss->chain.push_back(&access);
    end_request(access);
    return true;
  }
  const Event event = access.write ? Event::write : Event::read;
  const StateId state = slot == nullptr ? absent : slot->state;
  const Row& row = cache_.table_->row(state, event, false);
  if (!row.defined) cache_.no_row(state, event, line);
  if (!row.uses_bus && slot != nullptr) {
    charge_wait(access);
    cache_.set_state(*slot, line, row.next);
    perform(access, slot, store.bytes(*slot));
    if (cache_.observer_ != nullptr && !cache_.bus_socket->in_flight(line)) cache_.observer_->settled(line);
    next_piece(access);
    return true;
  }
  for (const auto& victim : victims_)
    if (victim->used && victim->line == line) return victim->refused && refuse(access, victim->status);
  if (unused_misses_.empty()) return false;
  Slot* place = slot;
  if (place == nullptr && (row.bus == BusKind::read || row.bus == BusKind::read_exclusive)) {
    place = store.victim(line);
    if (place == nullptr) return false;
    if (owned(*place) && free_slot() == nullptr)
      return slots_lost() && refuse(access, tlm::TLM_GENERIC_ERROR_RESPONSE);
  }
  charge_wait(access);
  end_request(access);
  Miss& miss = new_miss(access, place);
  cache_.bus_socket->request(miss);
  if (slot == nullptr && place != nullptr && place->state != absent) depart(*place);  // asked for behind the fetch
  return true;
}

// Memory's refusal of an earlier write-back stands in the way for good.
bool CoherentCache::Arbitrated::refuse(Access& access, tlm::tlm_response_status status) {
  charge_wait(access);
  access.progress.status = status;
  complete(access);
  return true;
}

void CoherentCache::Arbitrated::charge_wait(Access& access) {
  access.progress.parts[LatencyPart::wait_for_grant] += now_ps() - access.accounted;
  access.accounted = now_ps();
}

// Something became free: lets in whoever can, in order, nobody past an earlier access to the same line.
void CoherentCache::Arbitrated::retry() {
  for (std::size_t i = 0; i < waiting_.size();) {
    Access& access = *waiting_[i];
    const auto here = waiting_.begin() + static_cast<std::ptrdiff_t>(i);
    const bool behind = std::any_of(waiting_.begin(), here,
                                    [&](const Access* other) { return other->piece.line == access.piece.line; });
    if (behind || !admit(access)) {
      ++i;
      continue;
    }
    access_meter_.leave(now_ps(), access.queued);
    waiting_.erase(waiting_.begin() + static_cast<std::ptrdiff_t>(i));
  }
  if (change_waiters_ > 0) changed_.notify();
}

void CoherentCache::Arbitrated::perform(Access& access, Slot* slot, std::uint8_t* bytes) {
  if (slot != nullptr && slot->state != absent) cache_.store_.touch(*slot);
  if (access.payload != nullptr) cache_.perform(access.piece, bytes);
}

// ---- Reports

std::string CoherentCache::Arbitrated::waiting() const {
  std::ostringstream text;
  for (const Miss* miss : in_use_)
    text << cache_.name() << ": miss to line 0x" << std::hex << miss->line << std::dec << " since "
         << from_ps(miss->since) << ", for " << miss->chain.size() << " accesses, waits for the bus\n";
  for (const auto& victim : victims_)
    if (victim->used)
      text << cache_.name() << ": victim line 0x" << std::hex << victim->line << std::dec << " since "
           << from_ps(victim->since) << " waits for its write-back\n";
  for (const Access* access : waiting_)
    text << cache_.name() << ": access to line 0x" << std::hex << access->piece.line << std::dec << " since "
         << from_ps(access->queued) << " waits for a place: "
         << (leaving(access->piece.line) != nullptr ? "its line is on the way to memory"
             : unused_misses_.empty()               ? "every miss is in use"
                                                    : "no way or write-back slot is free")
         << '\n';
  if (responding_ != nullptr)
    text << cache_.name() << ": a response waits for the initiator's END_RESP, " << responses_.size()
         << " more behind it\n";
  return text.str();
}

std::vector<std::string> CoherentCache::Arbitrated::broken_laws() const {
  std::vector<std::string> broken;
  const auto check = [&](const char* queue, const QueueMeter& meter) {
    if (!meter.littles_law_holds(now_ps()))
      broken.push_back(std::string(cache_.name()) + ": Little's law fails for the queue '" + queue + "'");
  };
  check("misses", miss_meter_);
  check("write-back slots", victim_meter_);
  check("accesses without a place", access_meter_);
  if (parts_wrong_ > 0)
    broken.push_back(std::string(cache_.name()) + ": the parts of " + std::to_string(parts_wrong_) +
                     " latencies do not add up to them");
  return broken;
}

}  // namespace earshot
