// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Helpers for tests that simulate: run a body inside a simulation process, and a small system of caches with
// verbs to drive it. Header only; one simulation per process.
#pragma once

#define SC_INCLUDE_DYNAMIC_PROCESSES
#include <cstring>
#include <functional>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_initiator_socket.h>
#include <tlm_utils/simple_target_socket.h>
#include <vector>

#include "earshot/bus/io_port.h"
#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/observe/coherence_monitor.h"

namespace earshot::test {

// Runs `body` as the only user process and ends the simulation. Rethrows what it throws.
inline void simulate(const std::function<void()>& body) {
  std::exception_ptr error;
  sc_core::sc_spawn(
      [&] {
        try {
          body();
        } catch (...) {
          error = std::current_exception();
        }
        sc_core::sc_stop();
      },
      "body");
  sc_core::sc_start();
  if (error) std::rethrow_exception(error);
}

class Driver : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Driver> socket{"socket"};
  explicit Driver(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_invalidate_direct_mem_ptr(this, &Driver::invalidated);
  }

  tlm::tlm_response_status transport(tlm::tlm_command command, std::uint64_t address, std::uint8_t* data,
                                     unsigned length, unsigned streaming_width = ~0u,
                                     std::vector<std::uint8_t> enables = {}) {
    tlm::tlm_generic_payload payload;
    payload.set_command(command);
    payload.set_address(address);
    payload.set_data_ptr(data);
    payload.set_data_length(length);
    payload.set_streaming_width(streaming_width == ~0u ? length : streaming_width);
    payload.set_byte_enable_ptr(enables.empty() ? nullptr : enables.data());
    payload.set_byte_enable_length(static_cast<unsigned>(enables.size()));
    payload.set_dmi_allowed(true);
    payload.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    delay = sc_core::SC_ZERO_TIME;
    socket->b_transport(payload, delay);
    dmi_allowed = payload.is_dmi_allowed();
    return payload.get_response_status();
  }
  std::uint32_t read(std::uint64_t address) {
    std::uint32_t value = 0xdeadbeef;
    status = transport(tlm::TLM_READ_COMMAND, address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  void write(std::uint64_t address, std::uint32_t value) {
    status = transport(tlm::TLM_WRITE_COMMAND, address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
  }
  std::uint32_t debug_read(std::uint64_t address) {
    std::uint32_t value = 0xdeadbeef;
    debug(tlm::TLM_READ_COMMAND, address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  unsigned debug(tlm::tlm_command command, std::uint64_t address, std::uint8_t* data, unsigned length) {
    tlm::tlm_generic_payload payload;
    payload.set_command(command);
    payload.set_address(address);
    payload.set_data_ptr(data);
    payload.set_data_length(length);
    payload.set_streaming_width(length);
    return socket->transport_dbg(payload);
  }

  sc_core::sc_time delay;  // of the last access
  tlm::tlm_response_status status = tlm::TLM_INCOMPLETE_RESPONSE;
  bool dmi_allowed = false;
  std::vector<std::pair<std::uint64_t, std::uint64_t>> invalidations;

 private:
  void invalidated(sc_dt::uint64 first, sc_dt::uint64 last) { invalidations.emplace_back(first, last); }
};

struct SystemOptions {
  int caches = 2;
  Geometry geometry{1024, 2, 32, Replacement::lru, 1};
  std::vector<Window> windows{{"memory", 0, 0, true, 0}};
  bool watched = true;
  SnoopingBusConfig bus{};   // but for the windows
  CacheConfig cache{};       // but for geometry and table
  int io_ports = 0;
};

// Caches on a bus, a PlainMemory behind every window, a driver before every cache, the monitor watching.
class System {
 public:
  explicit System(const Table& protocol, const SystemOptions& options = {}) {
    SnoopingBusConfig bus_config = options.bus;
    bus_config.windows = options.windows;
    bus = std::make_unique<SnoopingBus>("bus", bus_config);
    for (const Window& window : options.windows) {
      memories.push_back(std::make_unique<PlainMemory>(window.name.c_str(), PlainMemoryConfig{}));
      bus->window_socket(window.name).bind(memories.back()->target_socket);
    }
    CacheConfig config = options.cache;
    config.geometry = options.geometry;
    config.table = std::make_shared<const Table>(protocol);
    for (int i = 0; i < options.caches; ++i) {
      const std::string number = std::to_string(i);
      if (protocol.family() == Family::update)
        caches.push_back(std::make_unique<UpdatingCache>(("cache" + number).c_str(), config));
      else
        caches.push_back(std::make_unique<InvalidatingCache>(("cache" + number).c_str(), config));
      caches.back()->bus_socket.bind(bus->cache_socket);
      drivers.push_back(std::make_unique<Driver>(("driver" + number).c_str()));
      drivers.back()->socket.bind(caches.back()->cpu_socket);
    }
    for (int i = 0; i < options.io_ports; ++i) {
      const std::string number = std::to_string(i);
      io_ports.push_back(std::make_unique<IoPort>(("io" + number).c_str()));
      io_ports.back()->bus_socket.bind(bus->cache_socket);
      devices.push_back(std::make_unique<Driver>(("device" + number).c_str()));
      devices.back()->socket.bind(io_ports.back()->io_socket);
    }
    if (!options.watched) return;
    monitor = std::make_unique<CoherenceMonitor>(
        options.geometry.line_bytes, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
          memories[static_cast<std::size_t>(bus->address_map().find(address, length))]->peek(address, to, length);
        });
    for (const auto& cache : caches) cache->set_observer(monitor.get());
    for (const auto& port : io_ports) port->set_observer(monitor.get());
  }

  Driver& device(int i) { return *devices[static_cast<std::size_t>(i)]; }
  Driver& cpu(int i) { return *drivers[static_cast<std::size_t>(i)]; }
  CoherentCache& cache(int i) { return *caches[static_cast<std::size_t>(i)]; }
  std::uint32_t in_memory(std::uint64_t address) const {
    std::uint32_t value = 0;
    memories.front()->peek(address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  std::string states(std::uint64_t address) const {
    std::string text;
    for (const auto& cache : caches) text += (text.empty() ? "" : " ") + cache->state_of(address);
    return text;
  }
  std::uint64_t count(BusKind kind) const { return bus->totals().kind[static_cast<std::size_t>(kind)].count; }

  std::unique_ptr<SnoopingBus> bus;
  std::vector<std::unique_ptr<PlainMemory>> memories;
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Driver>> drivers;
  std::vector<std::unique_ptr<IoPort>> io_ports;
  std::vector<std::unique_ptr<Driver>> devices;  // before the I/O ports
  std::unique_ptr<CoherenceMonitor> monitor;
};

// A cache of one line over a target of the test's own, whose socket is called target_socket.
template <typename Memory>
struct OneLineSystem {
  Memory memory{"memory"};
  SnoopingBus bus;
  UpdatingCache cache;
  Driver cpu{"cpu"};

  OneLineSystem() : bus("bus", bus_config()), cache("cache", cache_config()) {
    bus.window_socket("memory").bind(memory.target_socket);
    cache.bus_socket.bind(bus.cache_socket);
    cpu.socket.bind(cache.cpu_socket);
  }
  static SnoopingBusConfig bus_config() {
    SnoopingBusConfig config;
    config.windows = {{"memory", 0, 0, true, 0}};
    return config;
  }
  static CacheConfig cache_config() {
    CacheConfig config;
    config.geometry = {32, 1, 32, Replacement::lru, 1};
    config.table = std::make_shared<const Table>(load_table("dirty-owner-update"));
    return config;
  }
};

}  // namespace earshot::test
