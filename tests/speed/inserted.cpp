// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a cache costs a platform that somebody else wrote: initiators, interconnect and targets of the "lt"
// example of Debian's libsystemc-doc, as they are and with caches and a bus before their interconnect. Their
// traffic generator makes 64 accesses, too few to measure: ours keeps their initiators busy, 19 of 20
// accesses hit. A ratio within one run; nothing is asserted.
#include <algorithm>
#include <array>
#include <chrono>
#include <cstdio>
#include <cstdlib>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/updating_cache.h"
#include "models/SimpleBusLT.h"
// Theirs.
#include "at_target_1_phase.h"
#include "lt_initiator.h"
#include "lt_target.h"
#define REPORT_DEFINE_GLOBALS
#include "reporting.h"

namespace {

constexpr unsigned initiators = 2;

// Hands accesses to an initiator of theirs, one at a time, when told to.
class Feeder : public sc_core::sc_module {
 public:
  using Payload = tlm::tlm_generic_payload*;
  sc_core::sc_port<sc_core::sc_fifo_out_if<Payload>> request_out_port{"request_out_port"};
  sc_core::sc_port<sc_core::sc_fifo_in_if<Payload>> response_in_port{"response_in_port"};

  Feeder(sc_core::sc_module_name name, std::uint64_t base) : sc_module(name), base_(base) {
    SC_HAS_PROCESS(Feeder);
    SC_THREAD(feed);
  }
  void start(unsigned accesses) {
    left_ = accesses;
    go_.notify();
  }

 private:
  void feed() {
    unsigned char data[4] = {};
    std::uint64_t fresh = 0;
    for (std::uint64_t i = 0;; ++i) {
      while (left_ == 0) wait(go_);
      --left_;
      // 512 bytes that stay in a cache of 1 KiB; every 20th access is to a line that has left it.
      const bool miss = i % 20 == 19;
      payload_.set_address(base_ + (miss ? 512 + fresh++ * 32 % 2560 : i * 4 % 512));
      payload_.set_command(!miss && i % 3 == 0 ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND);
      payload_.set_data_ptr(data);
      payload_.set_data_length(4);
      payload_.set_streaming_width(4);
      payload_.set_dmi_allowed(false);
      payload_.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
      request_out_port->write(&payload_);
      if (response_in_port->read()->is_response_error()) std::abort();
    }
  }
  std::uint64_t base_;
  tlm::tlm_generic_payload payload_;
  unsigned left_ = 0;
  sc_core::sc_event go_;
};

// The example's top, with or without caches; each initiator has its own target's memory to itself.
struct Platform {
  Platform(const std::string& name, const char* protocol)
      : bus((name + "_bus").c_str()),
        target_1((name + "_target_1").c_str(), 201, "memory_socket_1", 4096, 4, ns(20), ns(100), ns(60)),
        target_2((name + "_target_2").c_str(), 202, "memory_socket_2", 4096, 4, ns(10), ns(50), ns(30)) {
    if (protocol != nullptr) {
      earshot::SnoopingBusConfig config;
      config.windows = {{"theirs", 0, 0x20000000, true, 0}};
      snooping = std::make_unique<earshot::SnoopingBus>((name + "_snooping").c_str(), config);
      snooping->window_socket("theirs").bind(bus.target_socket[0]);
      spare = std::make_unique<lt_initiator>((name + "_spare").c_str(), 100);
      spare->initiator_socket.bind(bus.target_socket[1]);  // idle: their interconnect has two ends
      spare->request_in_port(idle);
      spare->response_out_port(idle);
    }
    for (unsigned i = 0; i < initiators; ++i) {
      const std::string number = std::to_string(i);
      fifos.push_back(std::make_unique<std::array<sc_core::sc_fifo<Feeder::Payload>, 2>>());
      theirs.push_back(std::make_unique<lt_initiator>((name + "_initiator_" + number).c_str(), 101 + i));
      feeders.push_back(
          std::make_unique<Feeder>((name + "_feeder_" + number).c_str(), std::uint64_t{i} << 28));
      feeders[i]->request_out_port((*fifos[i])[0]);
      theirs[i]->request_in_port((*fifos[i])[0]);
      theirs[i]->response_out_port((*fifos[i])[1]);
      feeders[i]->response_in_port((*fifos[i])[1]);
      if (protocol == nullptr) {
        theirs[i]->initiator_socket.bind(bus.target_socket[i]);
        continue;
      }
      earshot::CacheConfig config;
      config.geometry = {1024, 4, 32, earshot::Replacement::lru, 1};
      config.table = std::make_shared<const earshot::Table>(earshot::load_table(protocol));
      caches.push_back(std::make_unique<earshot::UpdatingCache>((name + "_cache_" + number).c_str(), config));
      caches[i]->bus_socket.bind(snooping->cache_socket);
      theirs[i]->initiator_socket.bind(caches[i]->cpu_socket);
    }
    bus.initiator_socket[0](target_1.m_memory_socket);
    bus.initiator_socket[1](target_2.m_memory_socket);
  }
  static sc_core::sc_time ns(double value) { return {value, sc_core::SC_NS}; }

  // Host time for so many accesses of each initiator.
  double seconds(unsigned accesses) {
    for (const auto& feeder : feeders) feeder->start(accesses);
    const auto begin = std::chrono::steady_clock::now();
    sc_core::sc_start();
    return std::chrono::duration<double>(std::chrono::steady_clock::now() - begin).count();
  }
  double hits() const {
    earshot::CacheTotals totals;
    for (const auto& cache : caches) totals.add(cache->totals());
    return static_cast<double>(totals.hits) / static_cast<double>(totals.hits + totals.misses);
  }

  SimpleBusLT<initiators, 2> bus;
  at_target_1_phase target_1;
  lt_target target_2;
  sc_core::sc_fifo<Feeder::Payload> idle;
  std::unique_ptr<lt_initiator> spare;
  std::unique_ptr<earshot::SnoopingBus> snooping;
  std::vector<std::unique_ptr<std::array<sc_core::sc_fifo<Feeder::Payload>, 2>>> fifos;
  std::vector<std::unique_ptr<lt_initiator>> theirs;
  std::vector<std::unique_ptr<Feeder>> feeders;
  std::vector<std::unique_ptr<earshot::UpdatingCache>> caches;
};

double median(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  return values[values.size() / 2];
}

}  // namespace

int sc_main(int, char*[]) {
  REPORT_DISABLE_ALL_REPORTING();
  Platform plain("plain", nullptr), dirty_owner("dirty_owner", "dirty-owner-update"),
      dragon("dragon", "dragon");
  sc_core::sc_start(sc_core::SC_ZERO_TIME);
  constexpr unsigned accesses = 20000;
  std::vector<double> dirty_owner_ratios, dragon_ratios;
  for (int i = 0; i < 9; ++i) {
    const double without = plain.seconds(accesses);
    dirty_owner_ratios.push_back(dirty_owner.seconds(accesses) / without);
    dragon_ratios.push_back(dragon.seconds(accesses) / without);
  }
  std::printf("  %-64s %5.2f  (at most 1.5)\n",
              "Debian's lt example with caches / without, dirty-owner-update", median(dirty_owner_ratios));
  std::printf("  %-64s %5.2f  (at most 1.5)\n", "the same, dragon", median(dragon_ratios));
  std::printf("    (%.1f and %.1f %% of the accesses hit)\n", 100 * dirty_owner.hits(), 100 * dragon.hits());
  return 0;
}
