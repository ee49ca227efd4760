// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Two initiators of the user's own, two coherent caches, a memory of the user's own.
#include <cstdio>
#include <cstring>
#include <memory>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_initiator_socket.h>
#include <tlm_utils/simple_target_socket.h>
#include <vector>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/version.h"

struct Memory : sc_core::sc_module {
  tlm_utils::simple_target_socket<Memory> socket{"socket"};
  std::vector<unsigned char> bytes = std::vector<unsigned char>(4096);
  int writes = 0;
  explicit Memory(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_b_transport(this, &Memory::b_transport);
  }
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
    if (payload.is_write()) {
      ++writes;
      std::memcpy(&bytes[payload.get_address()], payload.get_data_ptr(), payload.get_data_length());
    } else {
      std::memcpy(payload.get_data_ptr(), &bytes[payload.get_address()], payload.get_data_length());
    }
    delay += sc_core::sc_time(50, sc_core::SC_NS);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
};

struct Processor : sc_core::sc_module {
  tlm_utils::simple_initiator_socket<Processor> socket{"socket"};
  explicit Processor(sc_core::sc_module_name name) : sc_module(name) {}
  int access(tlm::tlm_command command, int value) {
    tlm::tlm_generic_payload payload;
    payload.set_command(command);
    payload.set_address(0x40);
    payload.set_data_ptr(reinterpret_cast<unsigned char*>(&value));
    payload.set_data_length(sizeof value);
    payload.set_streaming_width(sizeof value);
    sc_core::sc_time delay;
    socket->b_transport(payload, delay);
    return value;
  }
};

int sc_main(int argc, char*[]) {
  if (argc > 1) {  // --version
    std::puts(earshot::version());
    return 0;
  }
  earshot::SnoopingBusConfig bus_config;
  bus_config.windows = {{"ram", 0, 4096, true, 0}};
  earshot::CacheConfig cache_config;
  cache_config.table = std::make_shared<const earshot::Table>(earshot::load_table("dirty-owner-update"));

  earshot::SnoopingBus bus("bus", bus_config);
  earshot::UpdatingCache cache0("cache0", cache_config), cache1("cache1", cache_config);
  Memory memory("memory");
  Processor cpu0("cpu0"), cpu1("cpu1");
  cpu0.socket.bind(cache0.cpu_socket);
  cpu1.socket.bind(cache1.cpu_socket);
  cache0.bus_socket.bind(bus.cache_socket);
  cache1.bus_socket.bind(bus.cache_socket);
  bus.window_socket("ram").bind(memory.socket);
  sc_core::sc_start(sc_core::SC_ZERO_TIME);

  cpu0.access(tlm::TLM_WRITE_COMMAND, 42);
  const int seen = cpu1.access(tlm::TLM_READ_COMMAND, 0);
  std::printf("cpu1 reads %d, memory was written %d times\n", seen, memory.writes);
  return seen == 42 && memory.writes == 0 ? 0 : 1;
}
