// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The TLM-2.0 base protocol at the cache's CPU side: IEEE 1666-2011, clauses 11 and 14.
#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

Table dirty_owner() { return load_table("dirty-owner-update"); }

// A memory that refuses the addresses at or above a limit, reads and writes apart.
class Refusing : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  tlm::tlm_target_socket<> target_socket{"target_socket"};
  bool refuse_reads = false, refuse_writes = false;
  int reads = 0, writes = 0;
  explicit Refusing(sc_core::sc_module_name name) : sc_module(name) { target_socket.bind(*this); }

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time&) override {
    ++(payload.is_write() ? writes : reads);
    if (payload.is_write() ? refuse_writes : refuse_reads) {
      payload.set_response_status(tlm::TLM_COMMAND_ERROR_RESPONSE);
      return;
    }
    if (payload.is_write())
      bytes_.write(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    else
      bytes_.read(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload&, tlm::tlm_phase&, sc_core::sc_time&) override {
    return tlm::TLM_COMPLETED;
  }
  bool get_direct_mem_ptr(tlm::tlm_generic_payload&, tlm::tlm_dmi&) override { return false; }
  unsigned transport_dbg(tlm::tlm_generic_payload&) override { return 0; }
  SparseBytes bytes_;
};

using RefusingSystem = OneLineSystem<Refusing>;

}  // namespace

TEST_CASE("byte enables leave disabled bytes alone, repeat over the data, and count for hits and misses", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    Driver& cpu = system.cpu(0);
    cpu.write(0x40, 0x11223344);
    std::uint8_t data[4] = {0xaa, 0xbb, 0xcc, 0xdd};
    // enabled, disabled, repeated: bytes 0 and 2
    CHECK(cpu.transport(tlm::TLM_WRITE_COMMAND, 0x40, data, 4, 4, {0xff, 0}) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(1).read(0x40) == 0x11cc33aa);
    std::uint8_t out[4] = {9, 9, 9, 9};
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0x40, out, 4, 4, {0, 0xff}) == tlm::TLM_OK_RESPONSE);
    CHECK(out[0] == 9);
    CHECK(out[1] == 0x33);
    CHECK(out[2] == 9);
    CHECK(out[3] == 0x11);
  });
}

TEST_CASE("an access with no byte enabled does nothing and succeeds", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::uint8_t data[4] = {1, 2, 3, 4};
    CHECK(system.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x40, data, 4, 4, {0}) == tlm::TLM_OK_RESPONSE);
    CHECK(system.states(0x40) == "I I");
    CHECK(system.in_memory(0x40) == 0);
  });
}

TEST_CASE("a streaming width below the length repeats the address range", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::uint8_t data[8] = {1, 2, 3, 4, 5, 6, 7, 8};
    CHECK(system.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x80, data, 8, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(1).read(0x80) == 0x08070605);  // the second beat overwrote the first
    CHECK(system.cpu(1).read(0x84) == 0);
    std::uint8_t out[8] = {};
    CHECK(system.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x80, out, 8, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(std::memcmp(out, data + 4, 4) == 0);
    CHECK(std::memcmp(out + 4, data + 4, 4) == 0);
  });
}

TEST_CASE("an access that crosses lines is split and each part is coherent", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    system.cpu(1).write(0x1c, 0xaaaaaaaa);
    system.cpu(0).write(0x1e, 0x44332211);  // two bytes in each of two lines
    CHECK(system.cpu(1).read(0x1c) == 0x2211aaaa);
    CHECK(system.cpu(1).read(0x20) == 0x00004433);
    CHECK(system.states(0x00) == "D V");
    CHECK(system.states(0x20) == "D V");
    CHECK(system.cache(0).totals().writes == 1);
  });
}

TEST_CASE("a burst longer than a line touches every line once", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::vector<std::uint8_t> data(200), out(200);
    for (std::size_t i = 0; i < data.size(); ++i) data[i] = static_cast<std::uint8_t>(i + 1);
    CHECK(system.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x110, data.data(), 200) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(1).transport(tlm::TLM_READ_COMMAND, 0x110, out.data(), 200) == tlm::TLM_OK_RESPONSE);
    CHECK(out == data);
    CHECK(system.bus->totals().supplied_by_owner == 7);  // [0x110, 0x1d8) lies in seven lines of 32 bytes
    CHECK(system.cache(1).totals().reads == 1);
    CHECK(system.cache(1).totals().misses == 1);
  });
}

TEST_CASE("TLM_IGNORE_COMMAND succeeds and does nothing", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::uint8_t data[4] = {1, 2, 3, 4};
    CHECK(system.cpu(0).transport(tlm::TLM_IGNORE_COMMAND, 0x40, data, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(0).delay == sc_core::SC_ZERO_TIME);
    CHECK(system.states(0x40) == "I I");
  });
}

TEST_CASE("accesses without data or length are burst errors", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::uint8_t data[4] = {};
    Driver& cpu = system.cpu(0);
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0x40, data, 0, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(cpu.transport(tlm::TLM_READ_COMMAND, 0x40, nullptr, 4, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(system.cache(0).totals().errors == 2);
    CHECK(system.cache(0).totals().reads == 0);
  });
}

TEST_CASE("a hit without a data pointer is a burst error like a miss", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    system.cpu(0).read(0x40);
    CHECK(system.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x40, nullptr, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
  });
}

TEST_CASE("a streaming access to an uncached window needs the window to hold one repetition only", "[cache]") {
  SystemOptions options;
  options.windows = {{"memory", 0, 0x10000, true, 0}, {"fifo", 0x20000, 4, false, 0}};
  System system(dirty_owner(), options);
  simulate([&] {
    std::uint8_t data[8] = {1, 2, 3, 4, 5, 6, 7, 8};
    CHECK(system.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x20000, data, 8, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(0).read(0x20000) == 0x08070605);
    CHECK(system.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x20000, data, 8) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
  });
}

TEST_CASE("a refused transaction is counted nowhere", "[cache]") {
  RefusingSystem system;
  simulate([&] {
    system.memory.refuse_reads = true;
    system.cpu.read(0x40);
    const SnoopingBusTotals totals = system.bus.totals();
    CHECK(totals.kind[static_cast<std::size_t>(BusKind::read)].count == 0);
    CHECK(totals.supplied_by_memory == 0);
    CHECK(totals.block_reads == 0);
  });
}

TEST_CASE("an address in no window, or leaving its window, is an address error", "[cache]") {
  SystemOptions options;
  options.windows = {{"memory", 0, 0x1000, true, 0}};
  System system(dirty_owner(), options);
  simulate([&] {
    system.cpu(0).read(0x1000);
    CHECK(system.cpu(0).status == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    system.cpu(0).read(0xffe);
    CHECK(system.cpu(0).status == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    system.cpu(0).read(0xffc);
    CHECK(system.cpu(0).status == tlm::TLM_OK_RESPONSE);
  });
}

TEST_CASE("the last line of the 64-bit space can be used", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    system.cpu(0).write(~std::uint64_t{0} - 3, 0x12345678);
    CHECK(system.cpu(0).status == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(1).read(~std::uint64_t{0} - 3) == 0x12345678);
    std::uint8_t data[8] = {};
    CHECK(system.cpu(0).transport(tlm::TLM_READ_COMMAND, ~std::uint64_t{0} - 3, data, 8) ==
          tlm::TLM_ADDRESS_ERROR_RESPONSE);
  });
}

TEST_CASE("a read that memory refuses comes back with memory's error and nothing is cached", "[cache]") {
  RefusingSystem system;
  simulate([&] {
    system.memory.refuse_reads = true;
    system.cpu.read(0x40);
    CHECK(system.cpu.status == tlm::TLM_COMMAND_ERROR_RESPONSE);
    CHECK(system.cache.state_of(0x40) == "I");
    system.cpu.write(0x40, 1);
    CHECK(system.cpu.status == tlm::TLM_COMMAND_ERROR_RESPONSE);
    CHECK(system.cache.state_of(0x40) == "I");
    CHECK(system.cache.totals().errors == 2);
    system.memory.refuse_reads = false;
    CHECK(system.cpu.read(0x40) == 0);
    CHECK(system.cpu.status == tlm::TLM_OK_RESPONSE);
  });
}

TEST_CASE("a write-back that memory refuses fails the access that caused it, and the dirty line stays", "[cache]") {
  RefusingSystem system;
  simulate([&] {
    system.cpu.write(0x40, 0x5eed);
    system.memory.refuse_writes = true;
    system.cpu.read(0x80);
    CHECK(system.cpu.status == tlm::TLM_COMMAND_ERROR_RESPONSE);
    CHECK(system.cache.state_of(0x40) == "D");
    CHECK(system.cache.state_of(0x80) == "I");
    CHECK(system.cpu.read(0x40) == 0x5eed);
    sc_core::sc_time delay;
    CHECK(system.cache.flush(delay) == 1);
    system.memory.refuse_writes = false;
    CHECK(system.cpu.read(0x80) == 0);
    CHECK(system.cpu.read(0x40) == 0x5eed);
  });
}

TEST_CASE("debug access sees the owner's value, writes every copy and memory, and disturbs nothing", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    system.cpu(0).read(0x40);
    system.cpu(1).write(0x40, 77);
    CHECK(system.in_memory(0x40) == 0);
    CHECK(system.cpu(0).debug_read(0x40) == 77);
    CHECK(system.states(0x40) == "V D");
    const auto bus_before = system.count(BusKind::read) + system.count(BusKind::update);
    std::uint32_t value = 99;
    CHECK(system.cpu(0).debug(tlm::TLM_WRITE_COMMAND, 0x40, reinterpret_cast<std::uint8_t*>(&value), 4) == 4);
    CHECK(system.states(0x40) == "V D");
    CHECK(system.count(BusKind::read) + system.count(BusKind::update) == bus_before);
    CHECK(system.cpu(0).read(0x40) == 99);
    CHECK(system.cpu(1).read(0x40) == 99);
    CHECK(system.in_memory(0x40) == 99);
    CHECK(sc_core::sc_time_stamp() == sc_core::SC_ZERO_TIME);
  });
}

TEST_CASE("a debug access across lines takes each line from where it is", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    system.cpu(0).write(0x1c, 0x11111111);
    system.cpu(1).write(0x20, 0x22222222);
    std::uint8_t bytes[8];
    CHECK(system.cpu(0).debug(tlm::TLM_READ_COMMAND, 0x1c, bytes, 8) == 8);
    const std::uint8_t expected[8] = {0x11, 0x11, 0x11, 0x11, 0x22, 0x22, 0x22, 0x22};
    CHECK(std::memcmp(bytes, expected, 8) == 0);
  });
}

TEST_CASE("DMI is refused for cached windows and granted for uncached ones", "[cache]") {
  SystemOptions options;
  options.windows = {{"memory", 0, 0x10000, true, 0}, {"device", 0x20000, 0x10000, false, 0x800}};
  System system(dirty_owner(), options);
  simulate([&] {
    tlm::tlm_generic_payload payload;
    tlm::tlm_dmi dmi;
    payload.set_address(0x40);
    CHECK_FALSE(system.cpu(0).socket->get_direct_mem_ptr(payload, dmi));
    CHECK(dmi.get_start_address() == 0);
    CHECK(dmi.get_end_address() == 0xffff);
    system.cpu(0).read(0x40);
    CHECK_FALSE(system.cpu(0).dmi_allowed);

    system.cpu(0).write(0x20010, 0xfeed);
    CHECK(system.cpu(0).dmi_allowed);
    payload.set_address(0x20010);
    REQUIRE(system.cpu(0).socket->get_direct_mem_ptr(payload, dmi));
    CHECK(dmi.get_start_address() == 0x20000);
    CHECK(dmi.get_end_address() == 0x207ff);  // the target's page ends at 0x1000, the window shows it from 0x800
    std::uint32_t value = 0;
    std::memcpy(&value, dmi.get_dmi_ptr() + (0x20010 - dmi.get_start_address()), 4);
    CHECK(value == 0xfeed);
  });
}

TEST_CASE("a target's DMI invalidation reaches the initiators in their own addresses", "[cache]") {
  SystemOptions options;
  options.windows = {{"memory", 0, 0x10000, true, 0}, {"device", 0x20000, 0x10000, false, 0x800}};
  System system(dirty_owner(), options);
  simulate([&] {
    system.memories[1]->target_socket->invalidate_direct_mem_ptr(0, 0x8ff);
    REQUIRE(system.cpu(1).invalidations.size() == 1);
    CHECK(system.cpu(1).invalidations[0] == std::make_pair(std::uint64_t{0x20000}, std::uint64_t{0x200ff}));
    CHECK(system.cpu(0).invalidations.size() == 1);
    system.memories[1]->target_socket->invalidate_direct_mem_ptr(0, 0x7ff);
    CHECK(system.cpu(0).invalidations.size() == 1);
  });
}

TEST_CASE("uncached accesses pass through unchanged and leave no copy", "[cache]") {
  SystemOptions options;
  options.windows = {{"memory", 0, 0x10000, true, 0}, {"device", 0x20000, 0x10000, false, 0}};
  System system(dirty_owner(), options);
  simulate([&] {
    system.cpu(0).write(0x20000, 5);
    CHECK(system.cpu(1).read(0x20000) == 5);
    CHECK(system.count(BusKind::io_write) == 1);
    CHECK(system.count(BusKind::io_read) == 1);
    CHECK(system.states(0x20000) == "I I");
    CHECK(system.cache(0).totals().uncached == 1);
    std::uint32_t at_device = 0;
    system.memories[1]->peek(0, reinterpret_cast<std::uint8_t*>(&at_device), 4);
    CHECK(at_device == 5);
  });
}

TEST_CASE("nb_transport completes early with the latency added to the time", "[cache]") {
  System system(dirty_owner());
  simulate([&] {
    std::uint32_t value = 3;
    tlm::tlm_generic_payload payload;
    payload.set_command(tlm::TLM_WRITE_COMMAND);
    payload.set_address(0x40);
    payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
    payload.set_data_length(4);
    payload.set_streaming_width(4);
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    sc_core::sc_time time(7, sc_core::SC_NS);
    CHECK(system.cpu(0).socket->nb_transport_fw(payload, phase, time) == tlm::TLM_COMPLETED);
    CHECK(payload.is_response_ok());
    CHECK(time > sc_core::sc_time(50, sc_core::SC_NS));
    CHECK(system.cpu(1).read(0x40) == 3);
    phase = tlm::END_RESP;
    CHECK_THROWS_WITH(system.cpu(0).socket->nb_transport_fw(payload, phase, time),
                      Catch::Contains("cache0: nb_transport_fw with phase END_RESP; every access completes early"));
  });
}
