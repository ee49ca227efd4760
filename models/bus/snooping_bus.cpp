// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/snooping_bus.h"

#include <algorithm>
#include <cstring>
#include <sstream>

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
  return found;
}

void report(const sc_core::sc_module& module, const std::vector<std::string>& found) {
  if (found.empty()) return;
  std::string text = module.name();
  for (const std::string& problem : found) text += "\n  " + problem;
  SC_REPORT_ERROR(config_id, text.c_str());
}

std::uint64_t cycles_for(unsigned bytes, unsigned width) { return (bytes + width - 1) / width; }

}  // namespace

// The caches' answers to one transaction, put together.
struct SnoopingBus::Snoop {
  PresenceIndex::Mask others = 0;  // the ports that hold the line
  bool shared = false;
  bool owner = false;              // the supplier owns the line
  bool write_memory = false;
  const std::uint8_t* supplied = nullptr;  // null: nobody supplies
};

class SnoopingBus::TargetPort : public sc_core::sc_module, private tlm::tlm_bw_transport_if<> {
 public:
  tlm::tlm_initiator_socket<> socket{"socket"};

  TargetPort(sc_core::sc_module_name name, SnoopingBus& bus, const Window& window)
      : sc_module(name), bus_(bus), window_(window) {
    socket.bind(*this);
  }
  const char* kind() const override { return "earshot::SnoopingBus::TargetPort"; }

 private:
  tlm::tlm_sync_enum nb_transport_bw(tlm::tlm_generic_payload&, tlm::tlm_phase&, sc_core::sc_time&) override {
    SC_REPORT_ERROR("/earshot/bus/protocol",
                    (std::string(name()) + ": nb_transport_bw from a target that was called by b_transport").c_str());
    return tlm::TLM_COMPLETED;
  }
  void invalidate_direct_mem_ptr(sc_dt::uint64 first, sc_dt::uint64 last) override {
    const std::uint64_t size_less_one = window_.last() - window_.base;
    if (last < window_.target_base || first > window_.target_base + size_less_one) return;
    first = std::max<std::uint64_t>(first, window_.target_base) - window_.target_base;
    last = std::min<std::uint64_t>(last - window_.target_base, size_less_one);
    for (SnoopInterface* cache : bus_.caches_)
      cache->invalidate_direct_memory(window_.base + first, window_.base + last);
  }

  SnoopingBus& bus_;
  Window window_;
};

SnoopingBus::SnoopingBus(sc_core::sc_module_name name, const SnoopingBusConfig& config)
    : sc_module(name), config_(config), period_(to_ps(config.clock)), map_(config.windows) {
  report(*this, problems(config));
  for (const Window& window : map_.windows())
    targets_.push_back(std::make_unique<TargetPort>(window.name.c_str(), *this, window));
  cache_socket.bind(static_cast<RequestInterface&>(*this));
  memory_payload_.set_extension(&memory_times_);
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
  for (int port = 0; port < cache_socket.size() && found.empty(); ++port) {
    caches_.push_back(cache_socket[port]);
    const unsigned line = caches_.back()->attached(port, map_);
    if (port == 0) line_bytes_ = line;
    if (line != line_bytes_)
      found.push_back("the cache at port " + std::to_string(port) + " has lines of " + std::to_string(line) +
                      " bytes, the one at port 0 of " + std::to_string(line_bytes_) + ": one bus, one line size");
  }
  for (const std::string& problem : map_.problems(line_bytes_)) found.push_back(problem);
  report(*this, found);
}

SnoopingBusTotals SnoopingBus::totals() const {
  SnoopingBusTotals totals = totals_;
  totals.address_busy = address_bus_.busy_time();
  totals.data_busy = data_bus_.busy_time();
  return totals;
}

// A place in the queue for the bus, given up also if the process is killed while it waits.
class SnoopingBus::Waiter {
 public:
  explicit Waiter(SnoopingBus& bus) : bus_(bus) { bus_.queue_.push_back(this); }
  ~Waiter() {
    const bool was_first = is_first();
    bus_.queue_.erase(std::find(bus_.queue_.begin(), bus_.queue_.end(), this));
    if (was_first && !bus_.held_) bus_.released_.notify();
  }
  Waiter(const Waiter&) = delete;
  Waiter& operator=(const Waiter&) = delete;
  bool is_first() const { return bus_.queue_.front() == this; }

 private:
  SnoopingBus& bus_;
};

bool SnoopingBus::acquire() {
  if (!held_ && queue_.empty()) {
    held_ = true;
    return false;
  }
  const Waiter waiter(*this);
  while (held_ || !waiter.is_first()) sc_core::wait(released_);
  held_ = true;
  return true;
}

void SnoopingBus::release() {
  held_ = false;
  if (!queue_.empty()) released_.notify();
}

void SnoopingBus::transact(BusTransaction& transaction, sc_core::sc_time& delay) {
  const Picoseconds base = now_ps();
  const Picoseconds requested = base + to_ps(delay);
  address_bus_.forget_before(base);
  data_bus_.forget_before(base);

  Picoseconds time = requested;
  address_phase(transaction.kind, time, transaction.parts);

  Snoop snoop;
  if (transaction.kind != BusKind::write_back) {
    snoop = ask_others(transaction);
    time += config_.snoop_cycles * period_;
    transaction.parts[LatencyPart::snoop] += config_.snoop_cycles * period_;
  }
  transaction.status = tlm::TLM_OK_RESPONSE;
  requester_ = transaction.requester;
  const bool accepted = memory_phase(transaction, snoop, time);
  requester_ = -1;
  if (accepted) {
    transaction.shared = snoop.shared;
    commit_others(transaction, snoop.others);
    if (transaction.kind == BusKind::read || transaction.kind == BusKind::read_exclusive) {
      presence_.add(transaction.line, transaction.requester);
      if (transaction.supplier == Supplier::memory)
        ++totals_.supplied_by_memory;
      else
        ++(transaction.supplier == Supplier::owner ? totals_.supplied_by_owner : totals_.supplied_by_sharer);
    } else if (transaction.kind == BusKind::write_back) {
      presence_.remove(transaction.line, transaction.requester);
    }
  }

  // Time a target really waited has passed already; the rest is annotated.
  const Picoseconds now = now_ps();
  delay = from_ps(time > now ? time - now : 0);
  if (transaction.status == tlm::TLM_OK_RESPONSE)
    count(transaction.kind, requested, time, transaction.parts[LatencyPart::wait_for_grant]);
}

void SnoopingBus::count(BusKind kind, Picoseconds requested, Picoseconds completed, Picoseconds wait) {
  if (completed < requested)
    SC_REPORT_ERROR(config_id, (std::string(name()) + ": simulation time has run past its end, 2^64 ps").c_str());
  BusKindTotals& totals = totals_.kind[static_cast<std::size_t>(kind)];
  ++totals.count;
  totals.time += completed - requested;
  totals.wait += wait;
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

// Moves the transaction's data and the memory's share of it. False: memory refused, nothing has changed.
bool SnoopingBus::memory_phase(BusTransaction& transaction, Snoop& snoop, Picoseconds& time) {
  switch (transaction.kind) {
    case BusKind::read:
    case BusKind::read_exclusive:
      fetch_line(transaction, snoop, time);
      break;
    case BusKind::upgrade:
      break;
    case BusKind::update:
      data_phase(transaction.kind, transaction.length, time, transaction.parts);
      break;
    case BusKind::write_through:
      data_phase(transaction.kind, transaction.length, time, transaction.parts);
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line + transaction.offset,
                    const_cast<std::uint8_t*>(transaction.word), transaction.length, transaction.byte_enable, time,
                    transaction.parts, transaction.status);
      if (transaction.status == tlm::TLM_OK_RESPONSE) ++totals_.word_writes;
      break;
    case BusKind::write_back:
      data_phase(transaction.kind, line_bytes_, time, transaction.parts);
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line, transaction.line_data, line_bytes_, nullptr, time,
                    transaction.parts, transaction.status);
      if (transaction.status == tlm::TLM_OK_RESPONSE) ++totals_.block_writes;
      break;
    case BusKind::io_read:
    case BusKind::io_write:
      break;  // never here: pass_through()
  }
  return transaction.status == tlm::TLM_OK_RESPONSE;
}

void SnoopingBus::fetch_line(BusTransaction& transaction, Snoop& snoop, Picoseconds& time) {
  if (snoop.supplied == nullptr) {
    const sc_dt::uint64 delta = sc_core::sc_delta_count();
    access_memory(tlm::TLM_READ_COMMAND, transaction.line, transaction.line_data, line_bytes_, nullptr, time,
                  transaction.parts, transaction.status);
    if (transaction.status != tlm::TLM_OK_RESPONSE) return;
    ++totals_.block_reads;
    // If the memory waited, a copy that may be written silently may have been: its holder answers now.
    if (sc_core::sc_delta_count() != delta) snoop = ask_others(transaction);
  }
  if (snoop.supplied != nullptr) {
    const Picoseconds supply = config_.supply_cycles * period_;
    time += supply;
    transaction.parts[LatencyPart::owner_supply] += supply;
    std::memcpy(transaction.line_data, snoop.supplied, line_bytes_);
    transaction.supplier = snoop.owner ? Supplier::owner : Supplier::sharer;
  } else {
    transaction.supplier = Supplier::memory;
  }
  data_phase(transaction.kind, line_bytes_, time, transaction.parts);

  // Memory takes the line off the bus; the requester does not wait for it. If the memory really waits, the
  // supplier may still write its copy meanwhile: then memory takes it once more.
  while (snoop.write_memory) {
    Picoseconds memory_time = time;
    LatencyParts unattended;
    access_memory(tlm::TLM_WRITE_COMMAND, transaction.line, transaction.line_data, line_bytes_, nullptr, memory_time,
                  unattended, transaction.status);
    if (transaction.status != tlm::TLM_OK_RESPONSE) return;
    ++totals_.block_writes;
    if (std::memcmp(transaction.line_data, snoop.supplied, line_bytes_) == 0) return;
    std::memcpy(transaction.line_data, snoop.supplied, line_bytes_);
  }
}

void SnoopingBus::address_phase(BusKind kind, Picoseconds& time, LatencyParts& parts) {
  const std::uint64_t cycles = config_.address_cycles;
  const Picoseconds ready = next_edge(time, period_) + config_.arbitration_cycles * period_;
  const Picoseconds start = address_bus_.book(ready, cycles * period_);
  parts[LatencyPart::wait_for_grant] += start - time;
  parts[LatencyPart::transfer] += cycles * period_;
  totals_.kind[static_cast<std::size_t>(kind)].address_cycles += cycles;
  time = start + cycles * period_;
}

void SnoopingBus::data_phase(BusKind kind, unsigned bytes, Picoseconds& time, LatencyParts& parts) {
  const std::uint64_t cycles = cycles_for(bytes, config_.width_bytes);
  const Picoseconds start = data_bus_.book(next_edge(time, period_), cycles * period_);
  parts[LatencyPart::wait_for_grant] += start - time;
  parts[LatencyPart::transfer] += cycles * period_;
  totals_.kind[static_cast<std::size_t>(kind)].data_cycles += cycles;
  time = start + cycles * period_;
}

void SnoopingBus::access_target(int window, tlm::tlm_generic_payload& payload, Picoseconds& time,
                                LatencyParts& parts) {
  const Window& where = map_.window(window);
  const std::uint64_t address = payload.get_address();
  payload.set_address(address - where.base + where.target_base);
  const Picoseconds now = now_ps();
  sc_core::sc_time delay = from_ps(time > now ? time - now : 0);
  targets_[static_cast<std::size_t>(window)]->socket->b_transport(payload, delay);
  payload.set_address(address);

  const Picoseconds end = std::max(time, now_ps() + to_ps(delay));
  const auto* times = payload.get_extension<MemoryTimes>();
  const Picoseconds queue = times == nullptr ? 0 : std::min(times->queue, end - time);
  parts[LatencyPart::memory_queue] += queue;
  parts[LatencyPart::memory_array] += end - time - queue;
  time = end;
}

void SnoopingBus::access_memory(tlm::tlm_command command, std::uint64_t address, std::uint8_t* data, unsigned length,
                                const std::uint8_t* byte_enable, Picoseconds& time, LatencyParts& parts,
                                tlm::tlm_response_status& status) {
  memory_payload_.set_command(command);
  memory_payload_.set_address(address);
  memory_payload_.set_data_ptr(data);
  memory_payload_.set_data_length(length);
  memory_payload_.set_streaming_width(length);
  memory_payload_.set_byte_enable_ptr(const_cast<std::uint8_t*>(byte_enable));
  memory_payload_.set_byte_enable_length(byte_enable == nullptr ? 0 : length);
  memory_payload_.set_dmi_allowed(false);
  memory_payload_.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  memory_times_.queue = 0;
  access_target(map_.find(address, length), memory_payload_, time, parts);
  status = memory_payload_.get_response_status();
}

void SnoopingBus::pass_through(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay, LatencyParts& parts) {
  const BusKind kind = payload.is_write() ? BusKind::io_write : BusKind::io_read;
  const Picoseconds base = now_ps();
  address_bus_.forget_before(base);
  data_bus_.forget_before(base);
  const Picoseconds requested = base + to_ps(delay);
  Picoseconds time = requested;
  const Picoseconds waited_before = parts[LatencyPart::wait_for_grant];

  address_phase(kind, time, parts);
  const int window =
      map_.find(payload.get_address(), std::min(payload.get_data_length(), payload.get_streaming_width()));
  if (kind == BusKind::io_write) data_phase(kind, payload.get_data_length(), time, parts);
  access_target(window, payload, time, parts);
  if (kind == BusKind::io_read) data_phase(kind, payload.get_data_length(), time, parts);

  const Picoseconds now = now_ps();
  delay = from_ps(time > now ? time - now : 0);
  if (payload.is_response_ok()) count(kind, requested, time, parts[LatencyPart::wait_for_grant] - waited_before);
}

unsigned SnoopingBus::debug(tlm::tlm_generic_payload& payload) {
  const std::uint64_t address = payload.get_address();
  const unsigned length = payload.get_data_length();
  if (length == 0) return 0;
  const int window_index = map_.find(address, length);
  if (window_index < 0) return 0;
  const Window& window = map_.window(window_index);

  payload.set_address(address - window.base + window.target_base);
  const unsigned done = targets_[static_cast<std::size_t>(window_index)]->socket->transport_dbg(payload);
  payload.set_address(address);
  if (!window.cached) return done;

  // Memory's bytes are in place; now the copies: an owner's win on a read, all are overwritten by a write.
  for (unsigned at = 0; at < done;) {
    const std::uint64_t line = (address + at) / line_bytes_ * line_bytes_;
    const unsigned offset = static_cast<unsigned>(address + at - line);
    const unsigned piece = std::min(line_bytes_ - offset, done - at);
    PresenceIndex::Mask rest = presence_.holders(line);
    if (requester_ >= 0) rest |= PresenceIndex::Mask{1} << requester_;
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
  payload.set_address(address - window.base + window.target_base);
  dmi.init();
  dmi.set_start_address(payload.get_address());  // for a target that refuses and says no more
  dmi.set_end_address(payload.get_address());
  const bool granted = targets_[static_cast<std::size_t>(index)]->socket->get_direct_mem_ptr(payload, dmi);
  payload.set_address(address);

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
