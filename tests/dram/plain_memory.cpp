// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// PlainMemory as an ordinary TLM-2.0 target, without our bus (IEEE 1666-2011, clauses 11 and 14). Defaults: 40 ns for
// each access and 5 ns for each beat of 8 bytes.
#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

struct Direct {
  PlainMemory memory;
  Driver cpu{"cpu"};
  explicit Direct(const PlainMemoryConfig& config = {}) : memory("memory", config) {
    cpu.socket.bind(memory.target_socket);
  }
};

}  // namespace

TEST_CASE("an access takes its latency and its beats, and waits for the one before", "[dram]") {
  PlainMemoryConfig config;
  config.write_latency = sc_core::sc_time(30, sc_core::SC_NS);
  Direct direct(config);
  simulate([&] {
    std::uint8_t data[32] = {};
    direct.cpu.transport(tlm::TLM_READ_COMMAND, 0, data, 32);
    CHECK(direct.cpu.delay == sc_core::sc_time(40 + 4 * 5, sc_core::SC_NS));
    direct.cpu.transport(tlm::TLM_WRITE_COMMAND, 0, data, 9);
    CHECK(direct.cpu.delay == sc_core::sc_time(60 + 30 + 2 * 5, sc_core::SC_NS));
    CHECK(direct.memory.busy_time() == 100000);
    sc_core::wait(1, sc_core::SC_US);
    direct.cpu.read(0);
    CHECK(direct.cpu.delay == sc_core::sc_time(45, sc_core::SC_NS));
  });
}

TEST_CASE("the waiting is told to an extension, and only the waiting", "[dram]") {
  Direct direct;
  simulate([&] {
    direct.cpu.read(0);
    std::uint32_t value = 0;
    tlm::tlm_generic_payload payload;
    MemoryTimes times;
    payload.set_extension(&times);
    payload.set_command(tlm::TLM_READ_COMMAND);
    payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
    payload.set_data_length(4);
    payload.set_streaming_width(4);
    sc_core::sc_time delay(5, sc_core::SC_NS);
    direct.cpu.socket->b_transport(payload, delay);
    CHECK(times.queue == 40000);
    CHECK(delay == sc_core::sc_time(90, sc_core::SC_NS));
    payload.clear_extension(&times);
  });
}

TEST_CASE("byte enables and streaming width are honoured by the memory itself", "[dram]") {
  Direct direct;
  simulate([&] {
    std::uint8_t data[4] = {1, 2, 3, 4};
    direct.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x10, data, 4, 4, {0xff, 0});
    CHECK(direct.cpu.read(0x10) == 0x00030001);
    direct.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x20, data, 4, 2);
    CHECK(direct.cpu.read(0x20) == 0x00000403);
  });
}

TEST_CASE("errors and ignored commands are answered as TLM-2.0 says", "[dram]") {
  Direct direct;
  simulate([&] {
    std::uint8_t data[8] = {};
    Driver& cpu = direct.cpu;
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0, data, 0, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0, data, 4, 0) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0, nullptr, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, ~std::uint64_t{0} - 3, data, 8) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(cpu.transport(tlm::TLM_IGNORE_COMMAND, 0, data, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(cpu.delay == sc_core::SC_ZERO_TIME);
    CHECK(cpu.debug(tlm::TLM_READ_COMMAND, ~std::uint64_t{0} - 3, data, 8) == 0);
  });
}

TEST_CASE("DMI is granted page by page and debug access sees the same bytes", "[dram]") {
  Direct direct;
  simulate([&] {
    tlm::tlm_generic_payload payload;
    tlm::tlm_dmi dmi;
    payload.set_address(0x12345);
    REQUIRE(direct.cpu.socket->get_direct_mem_ptr(payload, dmi));
    CHECK(dmi.get_start_address() == 0x12000);
    CHECK(dmi.get_end_address() == 0x12fff);
    CHECK(dmi.is_read_write_allowed());
    dmi.get_dmi_ptr()[0x345] = 0x5a;
    CHECK((direct.cpu.debug_read(0x12345) & 0xff) == 0x5a);
    CHECK((direct.cpu.read(0x12345) & 0xff) == 0x5a);
  });
}

TEST_CASE("a beat that is no power of two is a configuration error", "[dram]") {
  PlainMemoryConfig config;
  config.beat_bytes = 12;
  CHECK_THROWS_WITH(PlainMemory("memory", config),
                    Catch::Contains("memory\n  beat: 12 bytes; expected a power of two from 1 to 256"));
}
