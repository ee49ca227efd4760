// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Players, caches, a bus and one memory, the monitor watching: the whole simulator as the checks against
// published values use it. Any number of them may live in one simulation, each with a name prefix of its own.
#pragma once

#include <cstring>
#include <memory>
#include <stdexcept>
#include <string>
#include <vector>

#include "earshot/traffic/player.h"
#include "simulated.h"

namespace earshot::test {

// Stands before a memory and really waits the time that the memory only annotates, as targets of others do.
class Waiting : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<Waiting> target_socket{"target_socket"};
  tlm_utils::simple_initiator_socket<Waiting> initiator_socket{"initiator_socket"};
  explicit Waiting(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.register_b_transport(this, &Waiting::b_transport);
  }

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
    sc_core::wait(delay);
    delay = sc_core::SC_ZERO_TIME;
    initiator_socket->b_transport(payload, delay);
    sc_core::wait(delay);
    delay = sc_core::SC_ZERO_TIME;
  }
};

enum class MemoryTime { annotated, waits };

class PlayedSystem {
 public:
  PlayedSystem(const std::string& prefix, const Table& protocol, int count, const Geometry& geometry,
               const PlayerHooks& hooks = {}, MemoryTime memory_time = MemoryTime::annotated)
      : line_bytes_(geometry.line_bytes) {
    SnoopingBusConfig bus_config;
    bus_config.windows = {{"memory", 0, 0, true, 0}};
    bus = std::make_unique<SnoopingBus>((prefix + "bus").c_str(), bus_config);
    memory = std::make_unique<PlainMemory>((prefix + "memory").c_str(), PlainMemoryConfig{});
    if (memory_time == MemoryTime::waits) {
      waiting_ = std::make_unique<Waiting>((prefix + "waiting").c_str());
      bus->window_socket("memory").bind(waiting_->target_socket);
      waiting_->initiator_socket.bind(memory->target_socket);
    } else {
      bus->window_socket("memory").bind(memory->target_socket);
    }
    monitor = std::make_unique<CoherenceMonitor>(
        geometry.line_bytes, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
          memory->peek(address, to, length);
        });
    CacheConfig config;
    config.geometry = geometry;
    config.table = std::make_shared<const Table>(protocol);
    for (int i = 0; i < count; ++i) {
      const std::string number = std::to_string(i);
      if (protocol.family() == Family::update)
        caches.push_back(std::make_unique<UpdatingCache>((prefix + "cache" + number).c_str(), config));
      else
        caches.push_back(std::make_unique<InvalidatingCache>((prefix + "cache" + number).c_str(), config));
      caches.back()->bus_socket.bind(bus->cache_socket);
      caches.back()->set_observer(monitor.get());
      players.push_back(std::make_unique<Player>(
          (prefix + "player" + number).c_str(), static_cast<std::uint32_t>(i), sc_core::SC_ZERO_TIME, hooks));
      players.back()->initiator_socket.bind(caches.back()->cpu_socket);
    }
  }

  // One access to a word, from a simulation process; its time is added to `delay`. Returns the word.
  std::uint32_t perform(int who, bool write, std::uint64_t address, std::uint32_t value,
                        sc_core::sc_time& delay) {
    Access access;
    access.initiator = static_cast<std::uint32_t>(who);
    access.op = write ? AccessOp::write : AccessOp::read;
    access.has_value = write;
    access.size = sizeof value;
    access.address = address;
    access.value = value;
    Player& player = *players[static_cast<std::size_t>(who)];
    player.perform(access, delay);
    std::memcpy(&value, player.bytes(), sizeof value);
    return value;
  }
  std::uint32_t read(int who, std::uint64_t address) {
    sc_core::sc_time unattended;
    return perform(who, false, address, 0, unattended);
  }
  void write(int who, std::uint64_t address, std::uint32_t value) {
    sc_core::sc_time unattended;
    perform(who, true, address, value, unattended);
  }

  std::uint32_t in_memory(std::uint64_t address) const {
    std::uint32_t value = 0;
    memory->peek(address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  // The word in the cache's own copy of the line, which need not be what a coherent read returns. REQUIRES:
  // it has one.
  std::uint32_t in_copy(int which, std::uint64_t address) {
    const std::uint64_t line = address / line_bytes_ * line_bytes_;
    bool owner = false;
    const std::uint8_t* copy = bus->cache_socket[cache(which).port()]->copy_of(line, owner);
    if (copy == nullptr) throw std::logic_error("the cache holds no copy of the line");
    std::uint32_t value = 0;
    std::memcpy(&value, copy + (address - line), sizeof value);
    return value;
  }
  CoherentCache& cache(int which) { return *caches[static_cast<std::size_t>(which)]; }
  bool holds(int which, std::uint64_t address) {
    return cache(which).state_of(address) != cache(which).table().state(absent).name;
  }
  std::string states(std::uint64_t address) const {
    std::string text;
    for (const auto& each : caches) text += (text.empty() ? "" : " ") + each->state_of(address);
    return text;
  }
  std::uint64_t count(BusKind kind) const { return bus->totals().kind[static_cast<std::size_t>(kind)].count; }
  std::uint64_t transactions() const {
    std::uint64_t sum = 0;
    for (const BusKindTotals& kind : bus->totals().kind) sum += kind.count;
    return sum;
  }

  std::unique_ptr<SnoopingBus> bus;
  std::unique_ptr<PlainMemory> memory;
  std::unique_ptr<CoherenceMonitor> monitor;
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Player>> players;

 private:
  std::uint64_t line_bytes_;
  std::unique_ptr<Waiting> waiting_;
};

}  // namespace earshot::test
