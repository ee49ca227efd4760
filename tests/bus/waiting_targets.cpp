// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A target somebody else wrote may wait() inside b_transport. Coherence must hold all the same: later transactions
// queue behind the one in progress.
#include <catch2/catch.hpp>
#include <random>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

class Slow : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<Slow> target_socket{"target_socket"};
  SparseBytes bytes;
  explicit Slow(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.register_b_transport(this, &Slow::b_transport);
    target_socket.register_transport_dbg(this, &Slow::transport_dbg);
  }

 private:
  // Writes only, which is all these tests need.
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) {
    bytes.write(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    return payload.get_data_length();
  }
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
    sc_core::wait(delay + sc_core::sc_time(30, sc_core::SC_NS));
    delay = sc_core::SC_ZERO_TIME;
    if (payload.is_write())
      bytes.write(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    else
      bytes.read(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    sc_core::wait(30, sc_core::SC_NS);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
};

using OneLine = OneLineSystem<Slow>;

void race(const std::string& protocol) {
  SnoopingBusConfig bus_config;
  bus_config.windows = {{"memory", 0, 0, true, 0}};
  SnoopingBus bus("bus", bus_config);
  Slow memory("memory");
  bus.window_socket("memory").bind(memory.target_socket);
  CoherenceMonitor monitor(16, [&](std::uint64_t address, std::uint8_t* to, std::size_t length) {
    memory.bytes.read(address, to, length);
  });
  CacheConfig config;
  config.geometry = {64, 2, 16, Replacement::lru, 1};  // four lines: replacement all the time
  config.table = std::make_shared<const Table>(load_table(protocol));
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Driver>> cpus;
  std::exception_ptr error;
  for (int i = 0; i < 3; ++i) {
    const std::string number = std::to_string(i);
    if (config.table->family() == Family::update)
      caches.push_back(std::make_unique<UpdatingCache>(("cache" + number).c_str(), config));
    else
      caches.push_back(std::make_unique<InvalidatingCache>(("cache" + number).c_str(), config));
    caches.back()->set_observer(&monitor);
    caches.back()->bus_socket.bind(bus.cache_socket);
    cpus.push_back(std::make_unique<Driver>(("cpu" + number).c_str()));
    cpus.back()->socket.bind(caches.back()->cpu_socket);
    Driver* const cpu = cpus.back().get();
    sc_core::sc_spawn([cpu, i, &error] {
      std::mt19937 random(static_cast<unsigned>(i));  // seed: the processor's number
      try {
        for (std::uint32_t n = 0; n < 2000; ++n) {
          const std::uint64_t address = random() % 32 * 4;
          if (random() % 2 == 0)
            cpu->write(address, n * 4 + static_cast<std::uint32_t>(i));
          else
            cpu->read(address);
          if (random() % 3 != 0) sc_core::wait(cpu->delay);
        }
      } catch (...) {
        error = std::current_exception();
        sc_core::sc_stop();
      }
    });
  }
  sc_core::sc_start();
  if (error) std::rethrow_exception(error);
  CHECK(monitor.accesses_checked() == 6000);
  for (const auto& cache : caches) CHECK(cache->totals().parts.total() == cache->totals().latency().sum());
}

}  // namespace

TEST_CASE("dirty-owner-update stays coherent when memory waits", "[bus]") { race("dirty-owner-update"); }
TEST_CASE("dragon stays coherent when memory waits", "[bus]") { race("dragon"); }
TEST_CASE("firefly stays coherent when memory waits", "[bus]") { race("firefly"); }
TEST_CASE("moesi stays coherent when memory waits", "[bus]") { race("moesi"); }
TEST_CASE("mesi stays coherent when memory waits", "[bus]") { race("mesi"); }
TEST_CASE("write-once stays coherent when memory waits", "[bus]") { race("write-once"); }

TEST_CASE("processes that wait for the bus are served in the order they came", "[bus]") {
  Slow memory("memory");
  SnoopingBus bus("shared_bus", OneLine::bus_config());
  bus.window_socket("memory").bind(memory.target_socket);
  UpdatingCache greedy("greedy", OneLine::cache_config()), modest("modest", OneLine::cache_config());
  Driver first("first"), second("second");
  first.socket.bind(greedy.cpu_socket);
  second.socket.bind(modest.cpu_socket);
  greedy.bus_socket.bind(bus.cache_socket);
  modest.bus_socket.bind(bus.cache_socket);
  sc_core::sc_time served;
  simulate([&] {
    sc_core::sc_spawn([&] {
      sc_core::wait(sc_core::SC_ZERO_TIME);
      second.read(0x4000);
      served = sc_core::sc_time_stamp();
    });
    for (std::uint64_t i = 0; i < 50; ++i) first.read(i * 32);
  });
  CHECK(served > sc_core::SC_ZERO_TIME);
  CHECK(served < sc_core::sc_time(1, sc_core::SC_US));  // behind one transaction, not behind fifty
}

TEST_CASE("an owned victim survives the death of the process that was replacing it", "[bus]") {
  OneLine one;
  simulate([&] {
    one.cpu.write(0x00, 0xabcd);
    sc_core::sc_process_handle reader = sc_core::sc_spawn([&] { one.cpu.read(0x40); });
    sc_core::wait(10, sc_core::SC_NS);
    reader.kill();
    CHECK(one.cpu.read(0x00) == 0xabcd);
  });
}

TEST_CASE("a debug write reaches a line that is being fetched", "[bus]") {
  OneLine one;
  simulate([&] {
    sc_core::sc_spawn([&] {
      sc_core::wait(70, sc_core::SC_NS);  // the memory has copied its bytes and waits once more
      std::uint32_t value = 0x1234;
      CHECK(one.cpu.debug(tlm::TLM_WRITE_COMMAND, 0x40, reinterpret_cast<std::uint8_t*>(&value), 4) == 4);
    });
    CHECK(one.cpu.read(0x40) == 0x1234);
  });
}

TEST_CASE("byte enables of processes that share a cache do not mix", "[bus]") {
  OneLine one;
  simulate([&] {
    const auto write = [&](std::vector<std::uint8_t> enables) {
      std::uint8_t data[4] = {0x11, 0x11, 0x11, 0x11};
      one.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x40, data, 4, 4, enables);
    };
    sc_core::sc_process_handle a = sc_core::sc_spawn([&] { write({0xff, 0xff, 0, 0}); });
    sc_core::sc_process_handle b = sc_core::sc_spawn([&] { write({0, 0, 0, 0xff}); });
    sc_core::wait(a.terminated_event() & b.terminated_event());
    CHECK(one.cpu.read(0x40) == 0x11001111);
  });
}
