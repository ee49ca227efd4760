// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/access_request.h"
#include "earshot/bus/arbitrated_bus.h"
#include "earshot/bus/copy_bytes.h"

#include <algorithm>
#include <cstring>
#include <sstream>

namespace earshot {

void SnoopingBus::Arbitrated::start() {
  const int ports = static_cast<int>(bus_.caches_.size());
  arbiter_ = bus_.config_.make_arbiter ? bus_.config_.make_arbiter(ports) : make_arbiter(bus_.config_.arbiter, ports);
  bus_.totals_.ports.resize(bus_.caches_.size());
}

// ---- From request to grant

void SnoopingBus::Arbitrated::request(BusTransaction& transaction) {
  const Picoseconds now = now_ps();
  // An access's second transaction is as old as its first: first come, first served as a whole.
  const Picoseconds since = transaction.follows_up ? transaction.timeline.begin() : now;
  transaction.timeline = Timeline(now);
  const Picoseconds ready = next_edge(now, bus_.period_) + bus_.cycles(bus_.config_.arbitration_cycles);
  requests_.push({&transaction, since, ready});
  request_meter_.enter(now);
  if (!held_) schedule(std::max(ready, address_free_));
  if (watching_ || bus_.config_.stall_cycles == 0) return;
  watch_from_here();
}

// On an event of its own: what is cancelled stays in the kernel's queue until its time, so nothing near may be
// notified in place of something far.
void SnoopingBus::Arbitrated::watch_from_here() {
  watching_ = true;
  completions_seen_ = completions_;
  stall_.notify(from_ps(bus_.cycles(bus_.config_.stall_cycles)));
}

void SnoopingBus::Arbitrated::schedule(Picoseconds time) {
  if (time >= next_arbitration_) return;
  next_arbitration_ = time;
  agenda_.at<&Arbitrated::arbitrate>(time, this, static_cast<void*>(nullptr));
}

void SnoopingBus::Arbitrated::arbitrate(void*) {
  const Picoseconds now = now_ps();
  if (now != next_arbitration_) return;  // an earlier one was scheduled since, and has happened
  next_arbitration_ = RequestQueue::never;
  if (held_) return;  // bus_free() comes back
  while (now >= address_free_ && outstanding_ < bus_.config_.outstanding) {
    const std::vector<Contender>& contenders = requests_.contenders(now);
    if (contenders.empty()) break;
    const std::uint64_t cycle = now / bus_.period_;
    const std::uint64_t next = arbiter_->next_cycle(contenders, cycle);
    if (next > cycle) {
      schedule(bus_.cycles(next));
      break;
    }
    const std::size_t chosen = arbiter_->choose(contenders, cycle);
    if (next < cycle || chosen >= contenders.size()) {
      SC_REPORT_ERROR("/earshot/bus/arbiter", (std::string(bus_.name()) + ": the arbiter chose " + std::to_string(chosen) +
                                               " of " + std::to_string(contenders.size()) + " contenders for cycle " +
                                               std::to_string(next) + " in cycle " + std::to_string(cycle))
                                                  .c_str());
      return;
    }
    if (grant(requests_.take(chosen)) && held_) return;
  }
  if (requests_.size() == 0 || outstanding_ == bus_.config_.outstanding) return;  // finish() comes back
  if (now < address_free_) schedule(address_free_);
  if (const Picoseconds next = requests_.next_ready(now); next != RequestQueue::never)
    schedule(std::max(next, address_free_));
}

// Returns whether the bus was needed.
bool SnoopingBus::Arbitrated::grant(const RequestQueue::Request& request) {
  const Picoseconds now = now_ps();
  BusTransaction& transaction = *request.transaction;
  const int port = transaction.requester;
  const Picoseconds asked = transaction.timeline.begin();
  transaction.timeline.spend(LatencyPart::wait_for_grant, now);
  request_meter_.leave(now, asked);
  if (transaction.io == nullptr && !bus_.caches_[static_cast<std::size_t>(port)]->granted(transaction)) {
    ++completions_;
    return false;
  }
  BusPortTotals& totals = bus_.totals_.ports[static_cast<std::size_t>(port)];
  ++totals.grants;
  totals.wait += now - asked;
  totals.longest_wait = std::max(totals.longest_wait, now - asked);

  Active& active = new_active();
  active.transaction = &transaction;
  active.kind = transaction.kind;
  active.line = transaction.line;
  active.uncached = transaction.io != nullptr;
  active.port = port;
  active.granted = now;
  requests_.lock(transaction);
  ++outstanding_;
  outstanding_meter_.enter(now);
  bus_.totals_.kind[static_cast<std::size_t>(active.kind)].address_cycles += bus_.config_.address_cycles;
  const Picoseconds address_end = now + bus_.cycles(bus_.config_.address_cycles);
  transaction.timeline.spend(LatencyPart::transfer, address_end);
  transaction.status = tlm::TLM_OK_RESPONSE;
  if (bus_.config_.structure == BusStructure::connected) {
    held_ = true;
  } else {
    bus_.totals_.address_busy += address_end - now;
    address_free_ = address_end;
  }
  begin(active);
  return true;
}

SnoopingBus::Arbitrated::Active& SnoopingBus::Arbitrated::new_active() {
  if (unused_.empty()) {
    actives_.push_back(std::make_unique<Active>());
    unused_.push_back(actives_.back().get());
  }
  Active& active = *unused_.back();
  unused_.pop_back();
  active_.push_back(&active);
  active.effected = false;
  active.memory_takes_line = false;
  active.bytes = 0;
  active.access = nullptr;
  enter(active, Stage::snoop);
  return active;
}

void SnoopingBus::Arbitrated::enter(Active& active, Stage stage) {
  active.stage = stage;
  active.since = now_ps();
}

// ---- The grant: the one instant at which everybody's state changes

void SnoopingBus::Arbitrated::begin(Active& active) {
  BusTransaction& transaction = *active.transaction;
  if (active.kind == BusKind::write_back || (active.uncached && active.kind == BusKind::io_write)) {
    active.bytes = active.uncached ? transaction.io->get_data_length() : bus_.line_bytes_;
    need_data_bus(active, transaction.timeline.end());
  } else if (active.uncached) {
    need_memory(active, tlm::TLM_READ_COMMAND, nullptr, 0, transaction.timeline.end());
  } else {
    snoop(active);
  }
}

void SnoopingBus::Arbitrated::snoop(Active& active) {
  BusTransaction& transaction = *active.transaction;
  transaction.timeline.spend(LatencyPart::snoop,
                             transaction.timeline.end() + bus_.cycles(bus_.config_.snoop_cycles));
  const Picoseconds snooped = transaction.timeline.end();
  if (active.kind == BusKind::write_through) {  // takes effect when memory has the word
    active.bytes = transaction.length;
    std::memcpy(active.buffer.data(), transaction.word, transaction.length);
    transaction.word = active.buffer.data();
    need_data_bus(active, snooped);
    return;
  }
  const Snoop snoop = bus_.ask_others(transaction);
  if (active.kind == BusKind::io_read || active.kind == BusKind::io_write) {
    active.kind == BusKind::io_read ? io_read(active, snoop) : io_write(active, snoop);
    return;
  }
  const bool fetch = active.kind == BusKind::read || active.kind == BusKind::read_exclusive;
  if (fetch) {
    active.bytes = bus_.line_bytes_;
    active.memory_takes_line = snoop.write_memory;
    transaction.supplier = Supplier::memory;
    if (snoop.supplied != nullptr) {
      transaction.supplier = snoop.owner ? Supplier::owner : Supplier::sharer;
      std::memcpy(transaction.line_data, snoop.supplied, bus_.line_bytes_);
      if (snoop.write_memory) std::memcpy(active.buffer.data(), snoop.supplied, bus_.line_bytes_);
    }
  }
  commit(active, snoop);
  if (fetch && snoop.supplied == nullptr) {
    need_memory(active, tlm::TLM_READ_COMMAND, transaction.line_data, bus_.line_bytes_, snooped);
    return;
  }
  active.effected = true;
  bus_.caches_[static_cast<std::size_t>(active.port)]->effected(transaction);
  if (fetch) {
    bus_.presence_.add(active.line, active.port);
    transaction.timeline.spend(LatencyPart::owner_supply, snooped + bus_.cycles(bus_.config_.supply_cycles));
    need_data_bus(active, transaction.timeline.end());
  } else if (active.kind == BusKind::update) {
    active.bytes = transaction.length;
    need_data_bus(active, snooped);
  } else {
    agenda_.at<&Arbitrated::snoop_ended>(snooped, this, &active);
  }
}

// An I/O port's read: the bytes alone, from the owner or else from memory.
void SnoopingBus::Arbitrated::io_read(Active& active, const Snoop& snoop) {
  BusTransaction& transaction = *active.transaction;
  Timeline& timeline = transaction.timeline;
  active.bytes = transaction.length;
  if (snoop.supplied == nullptr) {
    commit(active, snoop);
    need_memory(active, tlm::TLM_READ_COMMAND, transaction.line_data, transaction.length, timeline.end());
    return;
  }
  copy_enabled(transaction.line_data, snoop.supplied + transaction.offset, transaction.length, transaction.byte_enable);
  commit(active, snoop);
  active.effected = true;
  bus_.caches_[static_cast<std::size_t>(active.port)]->effected(transaction);
  timeline.spend(LatencyPart::owner_supply, timeline.end() + bus_.cycles(bus_.config_.supply_cycles));
  need_data_bus(active, timeline.end());
}

// An I/O port's write: memory takes the word, or the line of an owner that goes with the word in it.
void SnoopingBus::Arbitrated::io_write(Active& active, const Snoop& snoop) {
  BusTransaction& transaction = *active.transaction;
  Timeline& timeline = transaction.timeline;
  active.memory_takes_line = bus_.merged(transaction, snoop, active.buffer.data());
  if (active.memory_takes_line)
    timeline.spend(LatencyPart::owner_supply, timeline.end() + bus_.cycles(bus_.config_.supply_cycles));
  else
    std::memcpy(active.buffer.data(), transaction.word, transaction.length);
  active.bytes = active.memory_takes_line ? bus_.line_bytes_ : transaction.length;
  commit(active, snoop);
  active.effected = true;
  bus_.caches_[static_cast<std::size_t>(active.port)]->effected(transaction);
  need_data_bus(active, timeline.end());
}

void SnoopingBus::Arbitrated::commit(Active& active, const Snoop& snoop) {
  active.transaction->shared = snoop.shared;
  bus_.commit_others(*active.transaction, snoop.others);
}

void SnoopingBus::Arbitrated::snoop_ended(Active* active) {  // of an upgrade: nothing to move
  let_go(*active);
  finish(*active, tlm::TLM_OK_RESPONSE);
  settle(*active);
}

// ---- Data bus: first ready, first served

// `ready` may be to come; who gets ready earlier goes first, at the same time who was granted first.
void SnoopingBus::Arbitrated::need_data_bus(Active& active, Picoseconds ready) {
  enter(active, Stage::data);
  active.ready = next_edge(ready, bus_.period_);
  std::size_t place = transfers_.size();
  while (place > 0 && transfers_[place - 1]->ready > active.ready) --place;  // one that has begun was ready before
  transfers_.insert(transfers_.begin() + static_cast<std::ptrdiff_t>(place), &active);
  if (place == 0) plan_transfer();
}

// The first in line will have the data bus as soon as it is ready and the bus is free.
void SnoopingBus::Arbitrated::plan_transfer() {
  Active& active = *transfers_.front();
  active.start = std::max(active.ready, data_free_);
  active.end = active.start + bus_.cycles(bus_.beats(active.bytes));
  agenda_.at<&Arbitrated::transferred>(active.end, this, &active);
}

void SnoopingBus::Arbitrated::transferred(Active* active) {
  const Picoseconds now = now_ps();
  if (transfers_.empty() || transfers_.front() != active || active->end != now) return;  // another went first
  // All that were ready by the time this one began are known now.
  for (; metered_ < transfers_.size() && transfers_[metered_]->ready <= active->start; ++metered_)
    data_meter_.enter(transfers_[metered_]->ready);
  data_meter_.leave(active->start, active->ready);
  --metered_;
  transfers_.erase(transfers_.begin());
  const Picoseconds turnaround = bus_.cycles(bus_.config_.turnaround_cycles);
  data_free_ = now + turnaround;
  if (!transfers_.empty()) plan_transfer();

  bus_.totals_.kind[static_cast<std::size_t>(active->kind)].data_cycles += bus_.beats(active->bytes);
  bus_.totals_.data_busy += data_free_ - active->start;
  ++bus_.transfers_;
  active->transaction->timeline.spend(LatencyPart::wait_for_grant, active->start);
  active->transaction->timeline.spend(LatencyPart::transfer, now);
  let_go(*active);

  BusTransaction& transaction = *active->transaction;
  switch (active->kind) {
    case BusKind::write_through:
      need_memory(*active, tlm::TLM_WRITE_COMMAND, active->buffer.data(), transaction.length, now);
      return;
    case BusKind::write_back:
      need_memory(*active, tlm::TLM_WRITE_COMMAND, transaction.line_data, bus_.line_bytes_, now);
      return;
    case BusKind::io_write:
      need_memory(*active, tlm::TLM_WRITE_COMMAND, active->buffer.data(), active->bytes, now);
      return;
    case BusKind::io_read:
      if (!active->uncached && !active->effected) {  // a copy may have been written silently since the grant
        if (const Snoop snoop = bus_.ask_others(transaction); snoop.supplied != nullptr)
          copy_enabled(transaction.line_data, snoop.supplied + transaction.offset, transaction.length,
                       transaction.byte_enable);
        bus_.caches_[static_cast<std::size_t>(active->port)]->effected(transaction);
      }
      finish(*active, transaction.status);
      settle(*active);
      return;
    case BusKind::read:
    case BusKind::read_exclusive:
      if (!active->effected) {
        bus_.presence_.add(active->line, active->port);
        bus_.caches_[static_cast<std::size_t>(active->port)]->effected(transaction);
      }
      bus_.count_supply(transaction);
      break;
    default:
      break;
  }
  finish(*active, tlm::TLM_OK_RESPONSE);
  if (active->memory_takes_line)  // off the bus; the requester does not wait for it
    need_memory(*active, tlm::TLM_WRITE_COMMAND, active->buffer.data(), bus_.line_bytes_, now);
  else
    settle(*active);
}

// A connected bus is free for the next grant after the last beat and its turnaround.
void SnoopingBus::Arbitrated::let_go(Active& active) {
  if (bus_.config_.structure != BusStructure::connected) return;
  const Picoseconds now = now_ps();
  const Picoseconds free = next_edge(std::max(now, data_free_), bus_.period_);
  bus_.totals_.address_busy += free - active.granted;
  if (free == now)
    bus_free(nullptr);
  else
    agenda_.at<&Arbitrated::bus_free>(free, this, static_cast<Active*>(nullptr));
}

void SnoopingBus::Arbitrated::bus_free(Active*) {
  held_ = false;
  if (requests_.size() > 0) schedule(now_ps());
}

// ---- Memory and peripherals

// For io accesses, the payload that is passed on says what and where.
void SnoopingBus::Arbitrated::need_memory(Active& active, tlm::tlm_command command, std::uint8_t* data,
                                          unsigned length, Picoseconds ready) {
  WindowAccess& access = accesses_.acquire();
  active.access = &access;
  access.transaction = &active;
  access.ready = ready;
  access.set_command(command);
  const BusTransaction* const transaction = active.transaction;
  if (transaction != nullptr && transaction->io != nullptr) {
    const tlm::tlm_generic_payload& io = *transaction->io;
    access.set_address(io.get_address());
    access.set_data_ptr(io.get_data_ptr());
    access.set_data_length(io.get_data_length());
    access.set_streaming_width(io.get_streaming_width());
    access.set_byte_enable_ptr(io.get_byte_enable_ptr());
    access.set_byte_enable_length(io.get_byte_enable_length());
    for (unsigned i = 0; i < tlm::max_num_extensions(); ++i)  // lent; what the bus has set itself stays
      if (io.get_extension(i) != nullptr && access.get_extension(i) == nullptr)
        access.set_extension(i, io.get_extension(i));
  } else {
    const bool word = active.kind == BusKind::write_through || active.kind == BusKind::io_read ||
                      (active.kind == BusKind::io_write && !active.memory_takes_line);
    access.set_address(active.line + (word ? transaction->offset : 0));
    access.set_data_ptr(data);
    access.set_data_length(length);
    access.set_streaming_width(length);
    const std::uint8_t* const enable = word ? transaction->byte_enable : nullptr;
    access.set_byte_enable_ptr(const_cast<std::uint8_t*>(enable));
    access.set_byte_enable_length(enable == nullptr ? 0 : length);
  }
  enter(active, active.transaction == nullptr ? Stage::memory_write : Stage::memory);
  const int window = bus_.map_.find(access.get_address(), extent_of(access));
  bus_.targets_[static_cast<std::size_t>(window)]->send(access);
}

void SnoopingBus::Arbitrated::answered(WindowAccess& access) {
  Active& active = *static_cast<Active*>(access.transaction);
  const bool read = active.kind == BusKind::io_read || (active.kind <= BusKind::read_exclusive && !active.effected);
  if (read && access.is_response_ok())
    memory_done(&active);  // the data bus can be told now when there will be data
  else
    agenda_.at<&Arbitrated::memory_done>(access.ended, this, &active);
}

void SnoopingBus::Arbitrated::memory_done(Active* active) {
  WindowAccess& access = *active->access;
  active->access = nullptr;
  const tlm::tlm_response_status status = access.get_response_status();
  BusTransaction* const transaction = active->transaction;
  if (transaction != nullptr) {
    Timeline& timeline = transaction->timeline;
    const Picoseconds from = timeline.end();
    const Picoseconds queue = std::min(access.sent - from + access.times.queue, access.ended - from);
    timeline.spend(LatencyPart::memory_queue, from + queue);
    timeline.spend(LatencyPart::memory_array, access.ended);
    if (transaction->io != nullptr) {
      transaction->io->set_response_status(status);
      transaction->io->set_dmi_allowed(access.is_dmi_allowed());
      for (unsigned i = 0; i < tlm::max_num_extensions(); ++i)
        if (transaction->io->get_extension(i) == access.get_extension(i)) access.set_extension(i, nullptr);
    }
  }
  access.release();
  const bool accepted = status == tlm::TLM_OK_RESPONSE;

  if (transaction == nullptr) {  // memory has taken a supplied line
    if (accepted)
      ++bus_.totals_.block_writes;
    else
      SC_REPORT_ERROR("/earshot/bus/memory",
                      (std::string(bus_.name()) + ": memory refuses a line it let be read").c_str());
    settle(*active);
    return;
  }
  switch (active->kind) {
    case BusKind::read:
    case BusKind::read_exclusive:
      if (accepted) {
        ++bus_.totals_.block_reads;
        need_data_bus(*active, access.ended);
        return;
      }
      let_go(*active);
      break;
    case BusKind::io_read:
      transaction->status = status;
      if (active->uncached) active->bytes = transaction->io->get_data_length();
      if (active->uncached || accepted) {
        if (!active->uncached) bus_.count_memory(*transaction, active->bytes == bus_.line_bytes_);
        need_data_bus(*active, access.ended);
        return;
      }
      let_go(*active);
      break;
    case BusKind::io_write:
      if (!active->uncached && accepted) bus_.count_memory(*transaction, active->bytes == bus_.line_bytes_);
      break;
    case BusKind::write_through:
      if (!accepted) break;
      ++bus_.totals_.word_writes;
      commit(*active, bus_.ask_others(*transaction));
      bus_.caches_[static_cast<std::size_t>(active->port)]->effected(*transaction);
      break;
    case BusKind::write_back:
      if (accepted) {
        ++bus_.totals_.block_writes;
        bus_.presence_.remove(active->line, active->port);
      }
      break;
    default:
      break;
  }
  finish(*active, status);
  settle(*active);
}

// ---- The end

void SnoopingBus::Arbitrated::finish(Active& active, tlm::tlm_response_status status) {
  BusTransaction& transaction = *active.transaction;
  active.transaction = nullptr;
  transaction.status = status;
  ++completions_;
  const Picoseconds now = now_ps();
  outstanding_meter_.leave(now, active.granted);
  if (outstanding_-- == bus_.config_.outstanding && requests_.size() > 0 && !held_)
    schedule(next_edge(std::max(now, address_free_), bus_.period_));
  if (status == tlm::TLM_OK_RESPONSE)
    bus_.count(active.kind, transaction.timeline.begin(), transaction.timeline.end(),
               transaction.timeline.since(transaction.timeline.begin())[LatencyPart::wait_for_grant]);
  bus_.caches_[static_cast<std::size_t>(active.port)]->finished(transaction);
}

// Memory has all that belongs to the transaction: the next one for its line may be granted.
void SnoopingBus::Arbitrated::settle(Active& active) {
  if (!active.uncached) {
    requests_.unlock(active.line);
    bus_.caches_[static_cast<std::size_t>(active.port)]->settled(active.line);
  } else {
    requests_.unlock_uncached(active.port);
  }
  if (requests_.size() > 0 && !held_) schedule(next_edge(std::max(now_ps(), address_free_), bus_.period_));
  last_end_ = now_ps();
  active_.erase(std::find(active_.begin(), active_.end(), &active));
  unused_.push_back(&active);
}

// ---- Debug access

PresenceIndex::Mask SnoopingBus::Arbitrated::requesters(std::uint64_t line) const {
  PresenceIndex::Mask ports = 0;
  for (const Active* active : active_)
    if (active->line == line && !active->uncached) ports |= PresenceIndex::Mask{1} << active->port;
  return ports;
}

void SnoopingBus::Arbitrated::debug(bool write, std::uint64_t address, std::uint8_t* bytes, unsigned length) {
  for (Active* active : active_) {
    std::uint64_t first = active->line;
    std::uint64_t size = 0;
    std::uint8_t* held = active->buffer.data();
    const std::uint8_t* enable = nullptr;
    const BusTransaction* const transaction = active->transaction;
    if (active->memory_takes_line) {
      size = bus_.line_bytes_;
    } else if (transaction != nullptr && !active->uncached &&
               (active->kind == BusKind::io_write ||
                (write && (active->kind == BusKind::write_through || active->kind == BusKind::io_read)))) {
      first += transaction->offset;
      size = transaction->length;
      enable = transaction->byte_enable;
      if (active->kind == BusKind::io_read) held = transaction->line_data;  // perhaps read from memory already
    }
    for (std::uint64_t i = 0; i < size; ++i) {
      const std::uint64_t at = first + i - address;
      if (at >= length || (enable != nullptr && enable[i] != TLM_BYTE_ENABLED)) continue;
      if (write)
        held[i] = bytes[at];
      else
        bytes[at] = held[i];
    }
  }
}

// ---- Reports

std::vector<BusQueue> SnoopingBus::Arbitrated::queues() const {
  std::vector<BusQueue> all{{"requests", &request_meter_},
                            {"outstanding transactions", &outstanding_meter_},
                            {"data bus", &data_meter_}};
  for (const auto& target : bus_.targets_) {
    all.push_back({"to window " + target->window().name, &target->queue()});
    all.push_back({"at window " + target->window().name, &target->target()});
  }
  return all;
}

void SnoopingBus::Arbitrated::watch() {
  watching_ = false;
  if (requests_.size() == 0 && active_.empty()) return;
  if (completions_ == completions_seen_)
    SC_REPORT_ERROR("/earshot/bus/stall", (std::string(bus_.name()) + ": nothing has completed for " +
                                           std::to_string(bus_.config_.stall_cycles) + " bus cycles, at " +
                                           sc_core::sc_time_stamp().to_string() + ". Outstanding:\n" + waiting())
                                              .c_str());
  watch_from_here();
}

std::string SnoopingBus::Arbitrated::waiting() const {
  static constexpr const char* stages[] = {"its snoop to end", "memory", "the data bus", "memory to take the supplied line"};
  std::ostringstream text;
  const auto what = [&](const char* kind, int port, std::uint64_t line) {
    text << "bus: " << kind << " of port " << port << ", line 0x" << std::hex << line << std::dec;
  };
  for (const Active* active : active_) {
    what(name_of(active->kind), active->port, active->line);
    text << ", granted at " << from_ps(active->granted) << ", waits for "
         << stages[static_cast<std::size_t>(active->stage)] << " since " << from_ps(active->since) << '\n';
  }
  requests_.for_each([&](const RequestQueue::Request& request, bool held_up) {
    what("request", request.transaction->requester, request.transaction->line);
    text << " asked for at " << from_ps(request.since) << ", waits for "
         << (held_up                                           ? "the transaction before it to end"
             : outstanding_ >= bus_.config_.outstanding ? "one of the outstanding transactions to end"
                                                               : "its grant")
         << '\n';
  });
  for (const auto& target : bus_.targets_) text << target->waiting();
  for (const SnoopInterface* cache : bus_.caches_) text << cache->waiting();
  return text.str();
}

}  // namespace earshot
