// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/coherent_cache.h"

#include <algorithm>
#include <cstring>
#include <sstream>

namespace earshot {
namespace {

constexpr const char* config_id = "/earshot/cache/config";
constexpr const char* protocol_id = "/earshot/cache/protocol";
constexpr const char* memory_id = "/earshot/cache/memory";

// A geometry to build the store with while problems are being reported.
Geometry checked(const sc_core::sc_object& module, const CacheConfig& config, Family family) {
  std::vector<std::string> found = config.geometry.problems();
  if (config.table == nullptr)
    found.push_back("protocol: no table was given; use load_table(\"dirty-owner-update\") or another");
  else if (config.table->family() != family)
    found.push_back("protocol: '" + config.table->name() + "' belongs to the " +
                    (family == Family::update ? "invalidate family: use an InvalidatingCache"
                                              : "update family: use an UpdatingCache"));
  if (found.empty()) return config.geometry;
  std::string text = module.name();
  for (const std::string& problem : found) text += "\n  " + problem;
  SC_REPORT_ERROR(config_id, text.c_str());
  return Geometry{};
}

// Holds the bus for as long as one line's access takes effect.
class Grant {
 public:
  explicit Grant(RequestInterface& bus) : bus_(bus), waited_(bus_.acquire()) {}
  ~Grant() { bus_.release(); }
  Grant(const Grant&) = delete;
  Grant& operator=(const Grant&) = delete;
  bool waited() const { return waited_; }

 private:
  RequestInterface& bus_;
  bool waited_;
};

// Copies a short run of bytes. The sizes processors use are spelt out: a call to memcpy() would cost as much as the
// rest of a hit.
inline void copy_word(std::uint8_t* to, const std::uint8_t* from, std::size_t length) {
  switch (length) {
    case 1: std::memcpy(to, from, 1); return;
    case 2: std::memcpy(to, from, 2); return;
    case 4: std::memcpy(to, from, 4); return;
    case 8: std::memcpy(to, from, 8); return;
    default: std::memcpy(to, from, length);
  }
}

void copy_enabled(std::uint8_t* to, const std::uint8_t* from, std::size_t length, const std::uint8_t* enable) {
  if (enable == nullptr) {
    copy_word(to, from, length);
    return;
  }
  for (std::size_t i = 0; i < length; ++i)
    if (enable[i] == TLM_BYTE_ENABLED) to[i] = from[i];
}

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

void CacheTotals::add(const CacheTotals& other) {
  reads += other.reads;
  writes += other.writes;
  hits += other.hits;
  misses += other.misses;
  uncached += other.uncached;
  errors += other.errors;
  latency.add(other.latency);
  parts.add(other.parts);
}

CoherentCache::CoherentCache(sc_core::sc_module_name name, const CacheConfig& config, Family family)
    : sc_module(name),
      table_(config.table),
      hit_ps_(to_ps(config.hit_time)),
      hit_time_(config.hit_time),
      store_(checked(*this, config, family)),
      leaving_(store_.line_bytes()),
      incoming_(store_.line_bytes()) {
  cpu_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
  bus_socket.bind(static_cast<SnoopInterface&>(*this));
}

CacheTotals CoherentCache::totals() const {
  CacheTotals all = totals_;
  const std::uint64_t fast = fast_reads_ + fast_writes_;
  all.reads += fast_reads_;
  all.writes += fast_writes_;
  all.hits += fast;
  all.latency.add(hit_ps_, fast);
  all.parts[LatencyPart::hit] += hit_ps_ * fast;
  return all;
}

const std::string& CoherentCache::state_of(std::uint64_t address) const {
  const std::uint64_t line = store_.line_of(address);
  for (const Slot& slot : store_.slots())
    if (slot.line == line) return table_->state(slot.state).name;
  return table_->state(absent).name;
}

// ---- CPU side

void CoherentCache::b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  const std::uint64_t address = payload.get_address();
  const unsigned length = payload.get_data_length();
  const std::uint64_t line = store_.line_of(address);
  const std::uint64_t offset = address - line;

  // The short path: a hit, in one line, that changes no state.
  if (payload.get_byte_enable_ptr() == nullptr && payload.get_data_ptr() != nullptr &&
      payload.get_streaming_width() >= length &&
      std::uint64_t{length} - 1 < store_.line_bytes() - offset) {
    Slot* const slot = store_.find(line);
    if (slot != nullptr) {
      const bool read = payload.get_command() == tlm::TLM_READ_COMMAND && slot->fast_read;
      if (read || (payload.get_command() == tlm::TLM_WRITE_COMMAND && slot->fast_write)) {
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
        delay += hit_time_;
        payload.set_dmi_allowed(false);
        payload.set_response_status(tlm::TLM_OK_RESPONSE);
        return;
      }
    }
  }
  access(payload, delay);
}

tlm::tlm_sync_enum CoherentCache::nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                                  sc_core::sc_time& time) {
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

void CoherentCache::access(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  payload.set_dmi_allowed(false);
  if (payload.get_command() == tlm::TLM_IGNORE_COMMAND) {
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    return;
  }
  Progress progress;
  progress.delay = delay;
  const unsigned extent = std::min(payload.get_data_length(), payload.get_streaming_width());
  const int window = extent == 0 ? -1 : map_->find(payload.get_address(), extent);
  if (extent == 0 || payload.get_data_ptr() == nullptr) {
    progress.status = tlm::TLM_BURST_ERROR_RESPONSE;
  } else if (window < 0) {
    progress.status = tlm::TLM_ADDRESS_ERROR_RESPONSE;
  } else if (!map_->window(window).cached) {
    bus_socket->pass_through(payload, delay, progress.parts);
    ++(payload.is_response_ok() ? totals_.uncached : totals_.errors);
    return;
  } else {
    access_cached(payload, progress);
  }
  payload.set_response_status(progress.status);
  delay = progress.delay;
  if (progress.status != tlm::TLM_OK_RESPONSE) {
    ++totals_.errors;
    return;
  }
  ++(payload.is_write() ? totals_.writes : totals_.reads);
  ++(progress.hit ? totals_.hits : totals_.misses);
  totals_.latency.add(progress.parts.total());
  totals_.parts.add(progress.parts);
}

// Takes the access apart: every repetition of the streaming width, every line, in address order.
void CoherentCache::access_cached(tlm::tlm_generic_payload& payload, Progress& progress) {
  const unsigned length = payload.get_data_length();
  std::vector<std::uint8_t> enables;  // one a byte; empty: all enabled
  if (payload.get_byte_enable_ptr() != nullptr && payload.get_byte_enable_length() != 0) {
    enables.resize(length);
    for (unsigned i = 0; i < length; ++i)
      enables[i] = payload.get_byte_enable_ptr()[i % payload.get_byte_enable_length()];
  }
  for (unsigned beat = 0; beat < length; beat += payload.get_streaming_width()) {
    const unsigned beat_length = std::min(payload.get_streaming_width(), length - beat);
    for (unsigned at = 0; at < beat_length;) {
      Piece piece;
      piece.write = payload.is_write();
      piece.line = store_.line_of(payload.get_address() + at);
      piece.offset = static_cast<std::uint32_t>(payload.get_address() + at - piece.line);
      piece.length = std::min(store_.line_bytes() - piece.offset, beat_length - at);
      piece.data = payload.get_data_ptr() + beat + at;
      piece.byte_enable = enables.empty() ? nullptr : enables.data() + beat + at;
      at += piece.length;
      if (piece.byte_enable != nullptr &&
          std::find(piece.byte_enable, piece.byte_enable + piece.length, TLM_BYTE_ENABLED) ==
              piece.byte_enable + piece.length)
        continue;
      access_line(piece, progress);
      if (progress.status != tlm::TLM_OK_RESPONSE) return;
    }
    if (payload.get_streaming_width() >= length) return;  // and never overflow `beat`
  }
}

void CoherentCache::access_line(const Piece& piece, Progress& progress) {
  progress.delay += hit_time_;
  progress.parts[LatencyPart::hit] += hit_ps_;

  const sc_core::sc_time before = sc_core::sc_time_stamp();
  Grant grant(*bus_socket.operator->());
  if (grant.waited()) {  // somebody else held the bus, perhaps past our local time
    const sc_core::sc_time passed = sc_core::sc_time_stamp() - before;
    if (passed > progress.delay) progress.parts[LatencyPart::wait_for_grant] += to_ps(passed - progress.delay);
    progress.delay = passed > progress.delay ? sc_core::SC_ZERO_TIME : progress.delay - passed;
  }
  judge(piece, progress);
  if (observer_ != nullptr) observer_->settled(piece.line);
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

    const Row& granted = table_->row(state, event, transaction.shared);
    if (slot != nullptr) set_state(*slot, piece.line, granted.next);
    again = granted.again;
  }
  std::uint8_t* const bytes = slot == nullptr ? incoming_.data() : store_.bytes(*slot);
  if (piece.write)
    copy_enabled(bytes + piece.offset, piece.data, piece.length, piece.byte_enable);
  else
    copy_enabled(piece.data, bytes + piece.offset, piece.length, piece.byte_enable);
  if (slot != nullptr && slot->state != absent) store_.touch(*slot);
  if (observer_ != nullptr) tell_access(piece, bytes);
}

// Fetches the line and places it, not yet in any state. The victim's write-back is asked for behind the fetch, and
// the access does not wait for it. If either is refused, nothing is cached and an owned victim is back in its place.
void CoherentCache::fetch(const Piece& piece, BusTransaction& transaction, Progress& progress, Slot*& slot) {
  Slot& place = slot != nullptr ? *slot : store_.victim(piece.line);
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

tlm::tlm_response_status CoherentCache::replace(std::uint64_t address, const sc_core::sc_time& delay) {
  const sc_core::sc_time before = sc_core::sc_time_stamp();
  Grant grant(*bus_socket.operator->());
  Slot* const slot = store_.find(store_.line_of(address));
  const sc_core::sc_time passed = sc_core::sc_time_stamp() - before;
  sc_core::sc_time unattended = passed > delay ? sc_core::SC_ZERO_TIME : delay - passed;
  return slot == nullptr ? tlm::TLM_OK_RESPONSE : give_up(*slot, unattended);
}

std::uint64_t CoherentCache::flush(sc_core::sc_time& delay) {
  std::uint64_t refused = 0;
  Grant grant(*bus_socket.operator->());
  for (Slot& slot : store_.slots()) {
    if (slot.state == absent) continue;
    if (give_up(slot, delay) != tlm::TLM_OK_RESPONSE) ++refused;
  }
  return refused;
}

std::uint64_t CoherentCache::owned_lines() const {
  return static_cast<std::uint64_t>(std::count_if(store_.slots().begin(), store_.slots().end(), [&](const Slot& slot) {
    return table_->state(slot.state).owner;
  }));
}

// ---- Bus side

unsigned CoherentCache::attached(int port, const AddressMap& map) {
  port_ = port;
  map_ = &map;
  return store_.line_bytes();
}

SnoopAnswer CoherentCache::ask(const BusTransaction& transaction) {
  SnoopAnswer answer;
  const Slot* const slot = store_.find(transaction.line);
  if (slot == nullptr) return answer;
  const Row& row = table_->row(slot->state, snoop_event(transaction.kind), false);
  if (!row.defined) no_row(slot->state, snoop_event(transaction.kind), transaction.line);
  answer.survives = row.next != absent;
  answer.owner = table_->state(slot->state).owner;
  answer.supplies = row.supply;
  answer.write_memory = row.write_memory;
  answer.line_data = store_.bytes(*slot);
  return answer;
}

bool CoherentCache::commit(const BusTransaction& transaction) {
  Slot* const slot = store_.find(transaction.line);
  if (slot == nullptr) return false;
  const Row& row = table_->row(slot->state, snoop_event(transaction.kind), false);
  if (row.take)
    copy_enabled(store_.bytes(*slot) + transaction.offset, transaction.word, transaction.length,
                 transaction.byte_enable);
  set_state(*slot, transaction.line, row.next);
  return slot->state != absent;
}

std::uint8_t* CoherentCache::copy_of(std::uint64_t line, bool& owner) {
  if (line == leaving_line_ || line == incoming_line_) {
    owner = line == leaving_line_;
    return owner ? leaving_.data() : incoming_.data();
  }
  Slot* const slot = store_.find(line);
  if (slot == nullptr) return nullptr;
  owner = table_->state(slot->state).owner;
  return store_.bytes(*slot);
}

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
  const auto enabled = [&](std::uint32_t i) {
    return piece.byte_enable == nullptr || piece.byte_enable[i] == TLM_BYTE_ENABLED;
  };
  for (std::uint32_t i = 0; i < piece.length;) {
    std::uint32_t end = i;
    while (end < piece.length && enabled(end)) ++end;
    if (end > i)
      observer_->accessed(port_, piece.write, piece.line + piece.offset + i, line_bytes + piece.offset + i, end - i);
    i = end + 1;
  }
}

}  // namespace earshot
