// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Annotated timing of the SnoopingBus.
#include <algorithm>
#include <array>
#include <cstring>
#include <utility>

#include "earshot/bus/access_request.h"
#include "earshot/bus/copy_bytes.h"
#include "earshot/bus/line_times.h"
#include "earshot/bus/snooping_bus.h"

namespace earshot {

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
  LineTimes::Line& line = lines_->of(transaction.line);
  line.under_way.forget_before(base);
  const Hold hold = address_phase(transaction.kind, data_bytes(transaction), &line.under_way, time, transaction.parts);

  Snoop snoop;
  if (transaction.kind != BusKind::write_back) {
    snoop = ask_others(transaction);
    time += cycles(config_.snoop_cycles);
    transaction.parts[LatencyPart::snoop] += cycles(config_.snoop_cycles);
  }
  transaction.status = tlm::TLM_OK_RESPONSE;
  requester_ = transaction.requester;
  const bool accepted = memory_phase(transaction, snoop, hold, time);
  requester_ = -1;
  if (config_.structure == BusStructure::split) line.under_way.occupy(hold.start, time);
  if (accepted) {
    transaction.shared = snoop.shared;
    commit_others(transaction, snoop.others);
    line.lose(snoop.others & ~presence_.holders(transaction.line), hold.start);
    line.gain(transaction.requester);
    if (transaction.kind == BusKind::read || transaction.kind == BusKind::read_exclusive) {
      presence_.add(transaction.line, transaction.requester);
      count_supply(transaction);
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

// Moves the transaction's data and the memory's share of it. False: memory refused, nothing has changed.
bool SnoopingBus::memory_phase(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time) {
  switch (transaction.kind) {
    case BusKind::read:
    case BusKind::read_exclusive:
      fetch_line(transaction, snoop, hold, time);
      break;
    case BusKind::upgrade:
      let_go(hold, time);
      break;
    case BusKind::update:
      data_phase(transaction.kind, transaction.length, hold, time, transaction.parts);
      break;
    case BusKind::write_through:
      data_phase(transaction.kind, transaction.length, hold, time, transaction.parts);
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line + transaction.offset,
                    const_cast<std::uint8_t*>(transaction.word), transaction.length, transaction.byte_enable, time,
                    transaction.parts, transaction.status);
      if (transaction.status == tlm::TLM_OK_RESPONSE) ++totals_.word_writes;
      break;
    case BusKind::write_back:
      data_phase(transaction.kind, line_bytes_, hold, time, transaction.parts);
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line, transaction.line_data, line_bytes_, nullptr, time,
                    transaction.parts, transaction.status);
      if (transaction.status == tlm::TLM_OK_RESPONSE) ++totals_.block_writes;
      break;
    case BusKind::io_read:
      io_read(transaction, snoop, hold, time);
      break;
    case BusKind::io_write:
      io_write(transaction, snoop, hold, time);
      break;
  }
  return transaction.status == tlm::TLM_OK_RESPONSE;
}

void SnoopingBus::fetch_line(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time) {
  if (snoop.supplied == nullptr) {
    const sc_dt::uint64 delta = sc_core::sc_delta_count();
    access_memory(tlm::TLM_READ_COMMAND, transaction.line, transaction.line_data, line_bytes_, nullptr, time,
                  transaction.parts, transaction.status);
    if (transaction.status != tlm::TLM_OK_RESPONSE) {
      let_go(hold, time);
      return;
    }
    ++totals_.block_reads;
    // If the memory waited, a copy that may be written silently may have been: its holder answers now.
    if (sc_core::sc_delta_count() != delta) snoop = ask_others(transaction);
  }
  if (snoop.supplied != nullptr) {
    const Picoseconds supply = cycles(config_.supply_cycles);
    time += supply;
    transaction.parts[LatencyPart::owner_supply] += supply;
    std::memcpy(transaction.line_data, snoop.supplied, line_bytes_);
    transaction.supplier = snoop.owner ? Supplier::owner : Supplier::sharer;
  } else {
    transaction.supplier = Supplier::memory;
  }
  data_phase(transaction.kind, line_bytes_, hold, time, transaction.parts);

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

// An I/O port's read: the bytes alone, from the owner or else from memory.
void SnoopingBus::io_read(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time) {
  if (snoop.supplied == nullptr) {
    access_memory(tlm::TLM_READ_COMMAND, transaction.line + transaction.offset, transaction.line_data, transaction.length,
                  transaction.byte_enable, time, transaction.parts, transaction.status);
    if (transaction.status != tlm::TLM_OK_RESPONSE) {
      let_go(hold, time);
      return;
    }
    count_memory(transaction, transaction.length == line_bytes_);
    snoop = ask_others(transaction);  // if memory waited, a copy may have been written silently
  } else {
    time += cycles(config_.supply_cycles);
    transaction.parts[LatencyPart::owner_supply] += cycles(config_.supply_cycles);
  }
  if (snoop.supplied != nullptr)
    copy_enabled(transaction.line_data, snoop.supplied + transaction.offset, transaction.length, transaction.byte_enable);
  data_phase(transaction.kind, transaction.length, hold, time, transaction.parts);
}

// An I/O port's write: to memory, and commit_others() gives it to the copies or ends them. If memory waits, a copy that
// ends may be written silently meanwhile: then memory takes the line once more.
void SnoopingBus::io_write(BusTransaction& transaction, Snoop& snoop, const Hold& hold, Picoseconds& time) {
  std::array<std::uint8_t, 256> line, newer;
  bool whole = merged(transaction, snoop, line.data());
  if (whole) {
    time += cycles(config_.supply_cycles);
    transaction.parts[LatencyPart::owner_supply] += cycles(config_.supply_cycles);
  }
  data_phase(transaction.kind, whole ? line_bytes_ : transaction.length, hold, time, transaction.parts);
  for (;;) {
    if (whole)
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line, line.data(), line_bytes_, nullptr, time, transaction.parts,
                    transaction.status);
    else
      access_memory(tlm::TLM_WRITE_COMMAND, transaction.line + transaction.offset,
                    const_cast<std::uint8_t*>(transaction.word), transaction.length, transaction.byte_enable, time,
                    transaction.parts, transaction.status);
    if (transaction.status != tlm::TLM_OK_RESPONSE) return;
    count_memory(transaction, whole || transaction.length == line_bytes_);
    snoop = ask_others(transaction);
    if (!merged(transaction, snoop, newer.data())) return;
    if (whole && std::memcmp(line.data(), newer.data(), line_bytes_) == 0) return;
    whole = true;
    line = newer;
  }
}

// The least time the bus is needed: what a gap of a connected bus must have room for. How long memory will take is not
// known before it is asked.
unsigned SnoopingBus::data_bytes(const BusTransaction& transaction) const {
  switch (transaction.kind) {
    case BusKind::upgrade:
      return 0;
    case BusKind::update:
    case BusKind::write_through:
    case BusKind::io_read:
    case BusKind::io_write:
      return transaction.length;
    default:
      return line_bytes_;
  }
}

SnoopingBus::Hold SnoopingBus::address_phase(BusKind kind, unsigned bytes, const Calendar* line, Picoseconds& time,
                                             LatencyParts& parts) {
  const Picoseconds address = cycles(config_.address_cycles);
  const Picoseconds ready = next_edge(time, period_) + cycles(config_.arbitration_cycles);
  const Picoseconds whole = address + cycles(beats(bytes));
  Picoseconds start = ready;
  if (config_.structure == BusStructure::connected) {
    start = address_bus_.earliest(ready, whole);
  } else {
    for (Picoseconds free = ready; line != nullptr;) {  // until both are free
      free = next_edge(line->earliest(start, whole), period_);
      start = address_bus_.earliest(free, address);
      if (start == free) break;
    }
    start = address_bus_.book(start, address);
  }
  parts[LatencyPart::wait_for_grant] += start - time;
  parts[LatencyPart::transfer] += address;
  totals_.kind[static_cast<std::size_t>(kind)].address_cycles += config_.address_cycles;
  time = start + address;
  return {start};
}

void SnoopingBus::data_phase(BusKind kind, unsigned bytes, const Hold& hold, Picoseconds& time, LatencyParts& parts) {
  const std::uint64_t count = beats(bytes);
  const Picoseconds turnaround = cycles(config_.turnaround_cycles);
  Picoseconds start = next_edge(time, period_);
  if (config_.structure == BusStructure::split) start = data_bus_.book(start, cycles(count) + turnaround);
  parts[LatencyPart::wait_for_grant] += start - time;
  parts[LatencyPart::transfer] += cycles(count);
  totals_.kind[static_cast<std::size_t>(kind)].data_cycles += count;
  totals_.data_busy += cycles(count) + turnaround;
  ++transfers_;
  time = start + cycles(count);
  let_go(hold, time + turnaround);
}

// A connected bus was held until `time`.
void SnoopingBus::let_go(const Hold& hold, Picoseconds time) {
  if (config_.structure == BusStructure::connected) address_bus_.occupy(hold.start, next_edge(time, period_));
}

const std::uint8_t* SnoopingBus::copy_before_loss(int requester, std::uint64_t line, Picoseconds time) const {
  const LineTimes::Line* const times = lines_->find(line);
  if (times == nullptr || !times->still_had_it(requester, time)) return nullptr;
  const PresenceIndex::Mask holders = presence_.holders(line);
  bool owner = false;
  return holders == 0 ? nullptr : caches_[static_cast<std::size_t>(__builtin_ctzll(holders))]->copy_of(line, owner);
}

void SnoopingBus::access_target(int window, tlm::tlm_generic_payload& payload, Picoseconds& time,
                                LatencyParts& parts) {
  WindowPort& target = *targets_[static_cast<std::size_t>(window)];
  struct Kept {  // also if the process is killed while the target waits
    tlm::tlm_generic_payload& payload;
    AccessPieces pieces{};
    ~Kept() { pieces.restore(payload); }
  } kept{payload};
  kept.pieces.start(target.window(), payload);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);  // perhaps no byte is enabled
  while (payload.is_response_ok() && !kept.pieces.done()) {
    kept.pieces.next(payload);
    access_target_once(target, payload, time, parts);
    target.judge(payload, kept.pieces);
  }
}

void SnoopingBus::access_target_once(WindowPort& target, tlm::tlm_generic_payload& payload, Picoseconds& time,
                                     LatencyParts& parts) {
  auto* const times = payload.get_extension<MemoryTimes>();
  const Picoseconds queue_before = times == nullptr ? 0 : std::exchange(times->queue, 0);
  const Picoseconds now = now_ps();
  sc_core::sc_time delay = from_ps(time > now ? time - now : 0);
  target.socket->b_transport(payload, delay);

  const Picoseconds end = std::max(time, now_ps() + to_ps(delay));
  const Picoseconds queue = times == nullptr ? 0 : std::min(times->queue, end - time);
  if (times != nullptr) times->queue += queue_before;
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

  const Hold hold = address_phase(kind, payload.get_data_length(), nullptr, time, parts);
  const int window =
      map_.find(payload.get_address(), extent_of(payload));
  if (kind == BusKind::io_write) data_phase(kind, payload.get_data_length(), hold, time, parts);
  access_target(window, payload, time, parts);
  if (kind == BusKind::io_read) data_phase(kind, payload.get_data_length(), hold, time, parts);

  const Picoseconds now = now_ps();
  delay = from_ps(time > now ? time - now : 0);
  if (payload.is_response_ok()) count(kind, requested, time, parts[LatencyPart::wait_for_grant] - waited_before);
}

}  // namespace earshot
