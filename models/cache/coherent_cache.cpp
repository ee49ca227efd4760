// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/coherent_cache.h"

#include <algorithm>
#include <sstream>

#include "earshot/cache/arbitrated_cache.h"
#include "earshot/cache/socket_peer.h"
#include "earshot/bus/copy_bytes.h"
#include "earshot/timing/kernel.h"
#include "earshot/version_check.h"

namespace earshot {
namespace {

constexpr const char* config_id = "/earshot/cache/config";
constexpr const char* protocol_id = "/earshot/cache/protocol";

// A geometry to build the store with while problems are being reported.
Geometry checked(const sc_core::sc_object& module, const CacheConfig& config, Family family) {
  std::vector<std::string> found = config.geometry.problems();
  if (config.table == nullptr)
    found.push_back("protocol: no table was given; use load_table(\"dirty-owner-update\") or another");
  else if (config.table->family() != family)
    found.push_back("protocol: '" + config.table->name() + "' belongs to the " +
                    (family == Family::update ? "invalidate family: use an InvalidatingCache"
                                              : "update family: use an UpdatingCache"));
  if (config.misses < 1) found.push_back("misses at once: 0; expected at least 1");
  if (config.write_back_slots < 1) found.push_back("write-back slots: 0; expected at least 1");
  if (found.empty()) return config.geometry;
  std::string text = module.name();
  for (const std::string& problem : found) text += "\n  " + problem;
  SC_REPORT_ERROR(config_id, text.c_str());
  return Geometry{};
}

}  // namespace

void CacheTotals::add(const CacheTotals& other) {
  reads += other.reads;
  writes += other.writes;
  hits += other.hits;
  misses += other.misses;
  uncached += other.uncached;
  errors += other.errors;
  for (std::size_t i = 0; i < kind.size(); ++i) kind[i].add(other.kind[i]);
  parts.add(other.parts);
}

Histogram CacheTotals::latency() const {
  Histogram all;
  for (const Histogram& one : kind) all.add(one);
  return all;
}

CoherentCache::CoherentCache(sc_core::sc_module_name name, const CacheConfig& config, Family family,
                             HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)),
      config_(config),
      table_(config.table),
      hit_ps_(to_ps(config.hit_time)),
      hit_time_(config.hit_time),
      store_(checked(*this, config, family)),
      leaving_(store_.line_bytes()),
      incoming_(store_.line_bytes()) {
  cpu_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
  bus_socket.bind(static_cast<SnoopInterface&>(*this));
  EARSHOT_HAS_PROCESS(CoherentCache);
  SC_METHOD(work);
  sensitive << agenda_.due();
  dont_initialize();
}

CoherentCache::~CoherentCache() = default;

CacheTotals CoherentCache::totals() const {
  CacheTotals all = totals_;
  const std::uint64_t fast = fast_reads_ + fast_writes_;
  all.reads += fast_reads_;
  all.writes += fast_writes_;
  all.hits += fast;
  all.kind[static_cast<std::size_t>(AccessKind::read_hit)].add(hit_ps_, fast_reads_);
  all.kind[static_cast<std::size_t>(AccessKind::write_hit)].add(hit_ps_, fast_writes_);
  all.parts[LatencyPart::hit] += hit_ps_ * fast;
  return all;
}

const std::string& CoherentCache::state_of(std::uint64_t address) const {
  const std::uint64_t line = store_.line_of(address);
  for (const Slot& slot : store_.slots())
    if (slot.line == line) return table_->state(slot.state).name;
  if (arbitrated_ != nullptr)
    if (const Slot* slot = arbitrated_->leaving(line); slot != nullptr) return table_->state(slot->state).name;
  return table_->state(absent).name;
}

// ---- CPU side

// The short path: a hit, in one line, that changes no state. Both timings charge hit_time for it.
inline bool CoherentCache::hit_quickly(tlm::tlm_generic_payload& payload) {
  const std::uint64_t address = payload.get_address();
  const unsigned length = payload.get_data_length();
  const std::uint64_t line = store_.line_of(address);
  const std::uint64_t offset = address - line;
  if (payload.get_byte_enable_ptr() != nullptr || payload.get_data_ptr() == nullptr ||
      payload.get_streaming_width() < length || std::uint64_t{length} - 1 >= store_.line_bytes() - offset)
    return false;
  Slot* const slot = store_.find(line);
  if (slot == nullptr) return false;
  const bool read = payload.get_command() == tlm::TLM_READ_COMMAND && slot->fast_read;
  if (!read && (payload.get_command() != tlm::TLM_WRITE_COMMAND || !slot->fast_write)) return false;

  std::uint8_t* const bytes = store_.bytes(*slot);
  if (read) {
    copy_word(payload.get_data_ptr(), bytes + offset, length);
    ++fast_reads_;
  } else {
    copy_word(bytes + offset, payload.get_data_ptr(), length);
    ++fast_writes_;
  }
  store_.touch(*slot);
  if (observer_ != nullptr) observer_->accessed(port_, !read, address, bytes + offset, length);
  payload.set_dmi_allowed(false);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
  return true;
}

void CoherentCache::b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  if (arbitrated_ != nullptr) {
    const AccessRequest request = request_of(payload, *map_);
    if (request == AccessRequest::cached) delay += hit_time_;
    if (delay != sc_core::SC_ZERO_TIME) sc_core::wait(delay);
    delay = sc_core::SC_ZERO_TIME;
    if (request != AccessRequest::cached || !arbitrated_->idle_for(store_.line_of(payload.get_address())) ||
        !hit_quickly(payload))
      arbitrated_->block(payload, request);
  } else if (hit_quickly(payload)) {
    delay += hit_time_;
  } else {
    access(payload, delay);
  }
}

tlm::tlm_sync_enum CoherentCache::nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                  sc_core::sc_time& time) {
  if (arbitrated_ != nullptr) return arbitrated_->forward(payload, phase, time);
  if (phase != tlm::BEGIN_REQ) {
    std::ostringstream text;
    text << name() << ": nb_transport_fw with phase " << phase
         << "; every access completes early, so only BEGIN_REQ is expected";
    SC_REPORT_ERROR(protocol_id, text.str().c_str());
    return tlm::TLM_COMPLETED;
  }
  b_transport(payload, time);
  return tlm::TLM_COMPLETED;
}

// REQUIRES: there is data.
Pieces CoherentCache::pieces_of(const tlm::tlm_generic_payload& payload) {
  if (payload.get_streaming_width() == 0)
    oddities_.remark(Oddity::streaming_width_0, std::string(name()) + ": initiator " + initiators_of(cpu_socket),
                     "sends a streaming width of 0: taken as the data length");
  return Pieces(payload, store_.line_bytes());
}

// A cached access is done.
void CoherentCache::count(bool write, const Progress& progress) {
  if (progress.status != tlm::TLM_OK_RESPONSE) {
    ++totals_.errors;
    return;
  }
  ++(write ? totals_.writes : totals_.reads);
  ++(progress.hit ? totals_.hits : totals_.misses);
  const AccessKind kind =
      write && progress.kind == AccessKind::read_hit ? AccessKind::write_hit : progress.kind;
  totals_.kind[static_cast<std::size_t>(kind)].add(progress.parts.total());
  totals_.parts.add(progress.parts);
}

// The access takes effect on the line's bytes.
void CoherentCache::perform(const Piece& piece, std::uint8_t* line_bytes) {
  if (piece.write)
    copy_enabled(line_bytes + piece.offset, piece.data, piece.length, piece.byte_enable);
  else
    copy_enabled(piece.data, line_bytes + piece.offset, piece.length, piece.byte_enable);
  if (observer_ != nullptr) tell_access(piece, line_bytes);
}

std::uint64_t CoherentCache::owned_lines() const {
  return static_cast<std::uint64_t>(std::count_if(store_.slots().begin(), store_.slots().end(), [&](const Slot& slot) {
    return table_->state(slot.state).owner;
  })) + (arbitrated_ == nullptr ? 0 : arbitrated_->owned_victims());
}

tlm::tlm_response_status CoherentCache::replace(std::uint64_t address, const sc_core::sc_time& delay) {
  if (arbitrated_ == nullptr) return replace_now(address, delay);
  arbitrated_->replace(store_.line_of(address));
  return tlm::TLM_OK_RESPONSE;
}

std::uint64_t CoherentCache::flush(sc_core::sc_time& delay) {
  return arbitrated_ == nullptr ? flush_now(delay) : arbitrated_->flush(delay);
}

std::vector<std::string> CoherentCache::broken_laws() const {
  return arbitrated_ == nullptr ? std::vector<std::string>{} : arbitrated_->broken_laws();
}

const QueueMeter* CoherentCache::miss_queue() const { return arbitrated_ ? &arbitrated_->misses() : nullptr; }
const QueueMeter* CoherentCache::write_back_queue() const { return arbitrated_ ? &arbitrated_->victims() : nullptr; }
const QueueMeter* CoherentCache::access_queue() const { return arbitrated_ ? &arbitrated_->accesses() : nullptr; }

// ---- Bus side

unsigned CoherentCache::attached(int port, const AddressMap& map, BusTiming timing) {
  port_ = port;
  map_ = &map;
  if (timing == BusTiming::arbitrated) arbitrated_ = std::make_unique<Arbitrated>(*this);
  return store_.line_bytes();
}

// The line's copy, in the store or in a write-back slot; null: none.
Slot* CoherentCache::held(std::uint64_t line, std::uint8_t*& bytes) {
  if (Slot* const slot = store_.find(line); slot != nullptr) {
    bytes = store_.bytes(*slot);
    return slot;
  }
  return arbitrated_ == nullptr ? nullptr : arbitrated_->leaving(line, bytes);
}

SnoopAnswer CoherentCache::ask(const BusTransaction& transaction) {
  SnoopAnswer answer;
  std::uint8_t* bytes = nullptr;
  const Slot* const slot = held(transaction.line, bytes);
  if (slot == nullptr) return answer;
  const Row& row = table_->row(slot->state, snoop_event(transaction.kind), false);
  if (!row.defined) no_row(slot->state, snoop_event(transaction.kind), transaction.line);
  answer.survives = row.next != absent;
  answer.owner = table_->state(slot->state).owner;
  answer.supplies = row.supply;
  answer.write_memory = row.write_memory;
  answer.line_data = bytes;
  return answer;
}

bool CoherentCache::commit(const BusTransaction& transaction) {
  std::uint8_t* bytes = nullptr;
  Slot* const slot = held(transaction.line, bytes);
  if (slot == nullptr) return false;
  const Row& row = table_->row(slot->state, snoop_event(transaction.kind), false);
  if (row.take)
    copy_enabled(bytes + transaction.offset, transaction.word, transaction.length, transaction.byte_enable);
  set_state(*slot, transaction.line, row.next);
  if (arbitrated_ != nullptr) arbitrated_->snooped(transaction.line);
  return slot->state != absent;
}

std::uint8_t* CoherentCache::copy_of(std::uint64_t line, bool& owner) {
  if (line == leaving_line_ || line == incoming_line_) {
    owner = line == leaving_line_;
    return owner ? leaving_.data() : incoming_.data();
  }
  std::uint8_t* bytes = nullptr;
  if (arbitrated_ != nullptr && (bytes = arbitrated_->in_flight(line, owner)) != nullptr) return bytes;
  const Slot* const slot = held(line, bytes);
  owner = slot != nullptr && table_->state(slot->state).owner;
  return bytes;
}

bool CoherentCache::granted(BusTransaction& transaction) { return arbitrated_->granted(transaction); }
void CoherentCache::effected(BusTransaction& transaction) { arbitrated_->effected(transaction); }
void CoherentCache::finished(BusTransaction& transaction) { arbitrated_->finished(transaction); }
void CoherentCache::settled(std::uint64_t line) {
  if (observer_ != nullptr) observer_->settled(line);
}
std::string CoherentCache::waiting() const { return arbitrated_ == nullptr ? "" : arbitrated_->waiting(); }

void CoherentCache::invalidate_direct_memory(std::uint64_t first, std::uint64_t last) {
  cpu_socket->invalidate_direct_mem_ptr(first, last);
}

// ---- Debug and direct memory

unsigned CoherentCache::transport_dbg(tlm::tlm_generic_payload& payload) {
  const unsigned done = bus_socket->debug(payload);
  if (observer_ != nullptr && payload.is_write() && done > 0)
    observer_->poked(payload.get_address(), payload.get_data_ptr(), done);
  return done;
}

bool CoherentCache::get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) {
  return bus_socket->direct_memory(payload, dmi);
}

// ---- Small things

void CoherentCache::set_state(Slot& slot, std::uint64_t line, StateId next) {
  const State& from = table_->state(slot.state);
  const State& to = table_->state(next);
  const bool changes = slot.state != next;
  if (next == absent) {
    store_.clear(slot);
  } else {
    slot.state = next;
    slot.fast_read = to.fast_read;
    slot.fast_write = to.fast_write;
  }
  if (changes && observer_ != nullptr) observer_->changed(port_, line, from, to);
}

void CoherentCache::no_row(StateId state, Event event, std::uint64_t line) const {
  std::ostringstream text;
  text << name() << ": protocol '" << table_->name() << "' has no row for state " << table_->state(state).name
       << ", event " << name_of(event) << " (line 0x" << std::hex << line
       << "); prove the table with 'earshot prove'";
  SC_REPORT_ERROR(protocol_id, text.str().c_str());
}

// Tells the observer of each run of enabled bytes.
void CoherentCache::tell_access(const Piece& piece, const std::uint8_t* line_bytes) {
  for_enabled_runs(piece.length, piece.byte_enable, [&](std::uint32_t first, std::uint32_t count) {
    const std::uint32_t at = piece.offset + first;
    observer_->accessed(port_, piece.write, piece.line + at, line_bytes + at, count);
  });
}

}  // namespace earshot
