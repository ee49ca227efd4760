// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/snooping_bus.h"

#include <algorithm>
#include <cstring>

#include "earshot/bus/arbitrated_bus.h"
#include "earshot/bus/copy_bytes.h"
#include "earshot/bus/line_times.h"
#include "earshot/timing/kernel.h"
#include "earshot/version_check.h"

namespace earshot {
namespace {

constexpr const char* config_id = "/earshot/bus/config";

std::vector<std::string> problems(const SnoopingBusConfig& config) {
  std::vector<std::string> found = AddressMap(config.windows).problems();
  if (config.clock == sc_core::SC_ZERO_TIME) found.push_back("clock: the period must be longer than 0");
  const unsigned width = config.width_bytes;
  if (width < 1 || width > 256 || (width & (width - 1)) != 0)
    found.push_back("width: " + std::to_string(width) + " bytes; expected a power of two from 1 to 256");
  if (config.address_cycles < 1) found.push_back("address cycles: 0; expected at least 1");
  if (config.outstanding < 1) found.push_back("outstanding transactions: 0; expected at least 1");
  return found;
}

void report(const sc_core::sc_module& module, const std::vector<std::string>& found) {
  if (found.empty()) return;
  std::string text = module.name();
  for (const std::string& problem : found) text += "\n  " + problem;
  SC_REPORT_ERROR(config_id, text.c_str());
}

}  // namespace

SnoopingBus::SnoopingBus(sc_core::sc_module_name name, const SnoopingBusConfig& config, HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)), config_(config), period_(to_ps(config.clock)),
      width_shift_(static_cast<unsigned>(__builtin_ctz(std::max(config.width_bytes, 1u)))), map_(config.windows) {
  report(*this, problems(config));
  for (const Window& window : map_.windows())
    targets_.push_back(std::make_unique<WindowPort>(window.name.c_str(), window,
                                                    static_cast<WindowPort::Listener&>(*this)));
  cache_socket.bind(static_cast<RequestInterface&>(*this));
  memory_payload_.set_extension(&memory_times_);
  if (config.timing == BusTiming::annotated) {
    lines_ = std::make_unique<LineTimes>();
    return;
  }
  arbitrated_ = std::make_unique<Arbitrated>(*this);
  EARSHOT_HAS_PROCESS(SnoopingBus);
  SC_METHOD(work);
  sensitive << arbitrated_->due();
  dont_initialize();
  SC_METHOD(watch);
  sensitive << arbitrated_->stall();
  dont_initialize();
}

SnoopingBus::~SnoopingBus() { memory_payload_.clear_extension(&memory_times_); }

tlm::tlm_initiator_socket<>& SnoopingBus::window_socket(const std::string& window) {
  for (std::size_t i = 0; i < targets_.size(); ++i)
    if (map_.windows()[i].name == window) return targets_[i]->socket;
  SC_REPORT_ERROR(config_id, (std::string(name()) + ": no window is named '" + window + "'").c_str());
  return targets_.front()->socket;
}

void SnoopingBus::end_of_elaboration() {
  std::vector<std::string> found;
  if (sc_core::sc_get_time_resolution() != sc_core::sc_time(1, sc_core::SC_PS))
    found.push_back("the kernel's time resolution is " + sc_core::sc_get_time_resolution().to_string() +
                    "; the models need 1 ps, the default");
  if (cache_socket.size() > 64)
    found.push_back(std::to_string(cache_socket.size()) + " caches are bound; one bus takes at most 64");
  int io_port = -1, first_cache = -1;
  for (int port = 0; port < cache_socket.size() && found.empty(); ++port) {
    caches_.push_back(cache_socket[port]);
    const unsigned line = caches_.back()->attached(port, map_, config_.timing);
    if (line == 0) {
      io_port = port;
      continue;
    }
    if (line_bytes_ == 0) {
      line_bytes_ = line;
      first_cache = port;
    }
    if (line != line_bytes_)
      found.push_back("the cache at port " + std::to_string(port) + " has lines of " + std::to_string(line) +
                      " bytes, the one at port " + std::to_string(first_cache) + " of " + std::to_string(line_bytes_) +
                      ": one bus, one line size");
  }
  if (line_bytes_ == 0 && found.empty()) found.push_back("only I/O ports are bound; a bus needs at least one cache");
  for (std::size_t port = 0; io_port >= 0 && port < caches_.size(); ++port)
    if (!caches_[port]->serves_io())
      found.push_back("an I/O port is bound (port " + std::to_string(io_port) + "), but the protocol of the cache at port " +
                      std::to_string(port) + " has no rows for snoop-io-read and snoop-io-write");
  for (const std::string& problem : map_.problems(line_bytes_)) found.push_back(problem);
  if (arbitrated_ != nullptr && !config_.make_arbiter)
    for (const std::string& problem : config_.arbiter.problems(cache_socket.size())) found.push_back(problem);
  report(*this, found);
  if (arbitrated_ != nullptr) arbitrated_->start();
}

void SnoopingBus::work() { arbitrated_->work(); }
void SnoopingBus::watch() { arbitrated_->watch(); }

void SnoopingBus::request(BusTransaction& transaction) { arbitrated_->request(transaction); }

bool SnoopingBus::in_flight(std::uint64_t line) const { return arbitrated_ != nullptr && arbitrated_->in_flight(line); }

void SnoopingBus::answered(WindowAccess& access) { arbitrated_->answered(access); }

void SnoopingBus::direct_memory_ended(std::uint64_t first, std::uint64_t last) {
  for (SnoopInterface* cache : caches_) cache->invalidate_direct_memory(first, last);
}

Picoseconds SnoopingBus::busy_until() const {
  return arbitrated_ == nullptr ? std::max(address_bus_.last_end(), data_bus_.last_end()) : arbitrated_->busy_until();
}

std::vector<BusQueue> SnoopingBus::queues() const {
  return arbitrated_ == nullptr ? std::vector<BusQueue>{} : arbitrated_->queues();
}

std::string SnoopingBus::waiting() const { return arbitrated_ == nullptr ? "" : arbitrated_->waiting(); }

std::vector<std::string> SnoopingBus::broken_laws() const {
  std::vector<std::string> broken;
  for (const BusQueue& queue : queues())
    if (!queue.meter->littles_law_holds(now_ps()))
      broken.push_back(std::string(name()) + ": Little's law fails for the queue '" + queue.name + "'");
  const SnoopingBusTotals sums = totals();
  std::uint64_t address = 0, data = 0;
  for (const BusKindTotals& kind : sums.kind) {
    address += kind.address_cycles;
    data += kind.data_cycles;
  }
  if (config_.structure == BusStructure::split && cycles(address) != sums.address_busy)
    broken.push_back(std::string(name()) + ": the address bus was busy for another time than its cycles take");
  if (cycles(data) + cycles(config_.turnaround_cycles) * transfers_ != sums.data_busy)
    broken.push_back(std::string(name()) + ": the data bus was busy for another time than its beats take");
  return broken;
}

SnoopingBusTotals SnoopingBus::totals() const {
  SnoopingBusTotals totals = totals_;
  if (arbitrated_ == nullptr) totals.address_busy = address_bus_.busy_time();
  if (arbitrated_ == nullptr && config_.structure == BusStructure::split) totals.data_busy = data_bus_.busy_time();
  return totals;
}

void SnoopingBus::count(BusKind kind, Picoseconds requested, Picoseconds completed, Picoseconds wait) {
  if (completed < requested)
    SC_REPORT_ERROR(config_id, (std::string(name()) + ": simulation time has run past its end, 2^64 ps").c_str());
  BusKindTotals& totals = totals_.kind[static_cast<std::size_t>(kind)];
  ++totals.count;
  totals.time += completed - requested;
  totals.wait += wait;
  totals.latency.add(completed - requested);
}

void SnoopingBus::count_supply(const BusTransaction& transaction) {
  switch (transaction.supplier) {
    case Supplier::owner: ++totals_.supplied_by_owner; return;
    case Supplier::sharer: ++totals_.supplied_by_sharer; return;
    default: ++totals_.supplied_by_memory;
  }
}

void SnoopingBus::count_memory(const BusTransaction& transaction, bool whole_line) {
  if (transaction.kind == BusKind::io_read)
    ++(whole_line ? totals_.block_reads : totals_.word_reads);
  else
    ++(whole_line ? totals_.block_writes : totals_.word_writes);
}

bool SnoopingBus::merged(const BusTransaction& transaction, const Snoop& snoop, std::uint8_t* line) const {
  if (!snoop.write_memory || (transaction.length == line_bytes_ && transaction.byte_enable == nullptr)) return false;
  std::memcpy(line, snoop.supplied, line_bytes_);
  copy_enabled(line + transaction.offset, transaction.word, transaction.length, transaction.byte_enable);
  return true;
}

SnoopingBus::Snoop SnoopingBus::ask_others(const BusTransaction& transaction) {
  Snoop snoop;
  snoop.others = presence_.holders(transaction.line) & ~(PresenceIndex::Mask{1} << transaction.requester);
  for (PresenceIndex::Mask rest = snoop.others; rest != 0; rest &= rest - 1) {
    const SnoopAnswer answer = caches_[static_cast<std::size_t>(__builtin_ctzll(rest))]->ask(transaction);
    snoop.shared |= answer.survives;
    if (!answer.supplies || (snoop.supplied != nullptr && !answer.owner)) continue;
    snoop.supplied = answer.line_data;
    snoop.owner = answer.owner;
    snoop.write_memory = answer.write_memory;
  }
  return snoop;
}

void SnoopingBus::commit_others(const BusTransaction& transaction, PresenceIndex::Mask others) {
  for (; others != 0; others &= others - 1) {
    const int port = __builtin_ctzll(others);
    if (!caches_[static_cast<std::size_t>(port)]->commit(transaction)) presence_.remove(transaction.line, port);
  }
}

unsigned SnoopingBus::debug(tlm::tlm_generic_payload& payload) {
  const std::uint64_t address = payload.get_address();
  const unsigned length = payload.get_data_length();
  if (length == 0) return 0;
  const int window_index = map_.find(address, length);
  if (window_index < 0) return 0;
  const Window& window = map_.window(window_index);

  AccessPieces said;
  said.start(window, payload);
  payload.set_address(address - window.base + window.target_base);
  const unsigned done =
      std::min(targets_[static_cast<std::size_t>(window_index)]->socket->transport_dbg(payload), length);
  said.restore(payload);
  if (!window.cached) return done;

  // Memory's bytes are in place; now the copies: an owner's win on a read, all are overwritten by a write.
  if (arbitrated_ != nullptr) arbitrated_->debug(payload.is_write(), address, payload.get_data_ptr(), done);
  for (unsigned at = 0; at < done;) {
    const std::uint64_t line = (address + at) / line_bytes_ * line_bytes_;
    const unsigned offset = static_cast<unsigned>(address + at - line);
    const unsigned piece = std::min(line_bytes_ - offset, done - at);
    PresenceIndex::Mask rest = presence_.holders(line);
    if (requester_ >= 0) rest |= PresenceIndex::Mask{1} << requester_;
    if (arbitrated_ != nullptr) rest |= arbitrated_->requesters(line);
    for (; rest != 0; rest &= rest - 1) {
      bool owner = false;
      std::uint8_t* copy = caches_[static_cast<std::size_t>(__builtin_ctzll(rest))]->copy_of(line, owner);
      if (copy == nullptr) continue;
      if (payload.is_write())
        std::memcpy(copy + offset, payload.get_data_ptr() + at, piece);
      else if (payload.is_read() && owner)
        std::memcpy(payload.get_data_ptr() + at, copy + offset, piece);
    }
    at += piece;
  }
  return done;
}

bool SnoopingBus::direct_memory(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) {
  const std::uint64_t address = payload.get_address();
  const int index = map_.find(address, 1);
  dmi.init();
  dmi.set_start_address(address);
  dmi.set_end_address(address);
  if (index < 0) return false;
  const Window& window = map_.window(index);
  if (window.cached) {  // a pointer would bypass every copy: refused for the whole window
    dmi.set_start_address(window.base);
    dmi.set_end_address(window.last());
    return false;
  }
  AccessPieces said;
  said.start(window, payload);
  payload.set_address(address - window.base + window.target_base);
  dmi.init();
  dmi.set_start_address(payload.get_address());  // for a target that refuses and says no more
  dmi.set_end_address(payload.get_address());
  const bool granted = targets_[static_cast<std::size_t>(index)]->socket->get_direct_mem_ptr(payload, dmi);
  said.restore(payload);

  // Back to this side's addresses, clipped to the window.
  const std::uint64_t first = std::max<std::uint64_t>(dmi.get_start_address(), window.target_base);
  const std::uint64_t last =
      std::min<std::uint64_t>(dmi.get_end_address() - window.target_base, window.last() - window.base);
  if (dmi.get_dmi_ptr() != nullptr) dmi.set_dmi_ptr(dmi.get_dmi_ptr() + (first - dmi.get_start_address()));
  dmi.set_start_address(first - window.target_base + window.base);
  dmi.set_end_address(last + window.base);
  return granted;
}

}  // namespace earshot
