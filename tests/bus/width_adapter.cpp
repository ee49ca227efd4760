// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/width_adapter.h"

#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

template <unsigned Width>
struct Wide : sc_core::sc_module {
  tlm_utils::simple_initiator_socket<Wide, Width> socket{"socket"};
  std::uint64_t invalidated = 0;
  int responses = 0;
  explicit Wide(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &Wide::backward);
    socket.register_invalidate_direct_mem_ptr(this, &Wide::invalidate);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload&, tlm::tlm_phase& phase, sc_core::sc_time&) {
    if (phase != tlm::BEGIN_RESP) return tlm::TLM_ACCEPTED;
    ++responses;
    return tlm::TLM_COMPLETED;
  }
  void invalidate(sc_dt::uint64 first, sc_dt::uint64) { invalidated = first; }
};

template <unsigned Width>
void drive(BusTiming timing) {
  SystemOptions options;
  options.bus.timing = timing;
  options.windows = {{"memory", 0, 0x1000, true, 0}, {"buffer", 0x1000, 0x1000, false, 0}};
  System system(load_table("dirty-owner-update"), options);
  CacheConfig config;
  config.table = std::make_shared<const Table>(load_table("dirty-owner-update"));
  UpdatingCache cache("wide_cache", config);
  Wide<Width> wide("wide");
  WidthAdapter<Width, 32> adapter("adapter");
  wide.socket.bind(adapter.target_socket);
  adapter.initiator_socket.bind(cache.cpu_socket);
  cache.bus_socket.bind(system.bus->cache_socket);
  cache.set_observer(system.monitor.get());
  simulate([&] {
    system.cpu(0).write(0x108, 0x01020304);
    std::uint64_t value = 0;
    tlm::tlm_generic_payload payload;
    payload.set_read();
    payload.set_address(0x108);
    payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
    payload.set_data_length(8);
    payload.set_streaming_width(8);
    sc_core::sc_time delay;
    wide.socket->b_transport(payload, delay);
    CHECK(value == 0x01020304);
    value = 0;
    CHECK(wide.socket->transport_dbg(payload) == 8);
    CHECK(value == 0x01020304);
    tlm::tlm_dmi dmi;
    CHECK_FALSE(wide.socket->get_direct_mem_ptr(payload, dmi));
    payload.set_address(0x1000);
    CHECK(wide.socket->get_direct_mem_ptr(payload, dmi));
    if (timing == BusTiming::annotated) return;
    value = 0;
    payload.set_address(0x108);
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    CHECK(wide.socket->nb_transport_fw(payload, phase, delay) == tlm::TLM_ACCEPTED);
    sc_core::wait(sc_core::sc_time(1, sc_core::SC_US));
    CHECK(wide.responses == 1);
    CHECK(value == 0x01020304);
  });
}

}  // namespace

TEST_CASE("an initiator of 64 bits drives a cache through an adapter, annotated", "[bus]") { drive<64>(BusTiming::annotated); }
TEST_CASE("an initiator of 64 bits drives a cache through an adapter, arbitrated", "[bus]") { drive<64>(BusTiming::arbitrated); }
TEST_CASE("an initiator of 128 bits drives a cache through an adapter", "[bus]") { drive<128>(BusTiming::arbitrated); }
