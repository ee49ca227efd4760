// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a transaction costs, from the configuration alone: common practice, no source; the sums are worked out here.
// Clock 5 ns; arbitration 1, address 1, snoop 1, supply 2 cycles; 8 bytes a beat; hit 1 ns; memory 40 ns + 5 ns a beat.
#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

double ns(const sc_core::sc_time& time) { return time.to_seconds() * 1e9; }

}  // namespace

TEST_CASE("a miss in memory costs address, snoop, memory and four beats, a hit the lookup", "[bus]") {
  System system(load_table("dirty-owner-update"));
  simulate([&] {
    system.cpu(0).read(0x40);
    // 1 lookup; 4 to the clock edge and 5 of arbitration; 5 address; 5 snoop; 40 + 4 x 5 memory; 4 x 5 data
    CHECK(ns(system.cpu(0).delay) == Approx(1 + 4 + 10 + 5 + 60 + 20));
    system.cpu(0).read(0x44);
    CHECK(ns(system.cpu(0).delay) == Approx(1));
    const CacheTotals totals = system.cache(0).totals();
    CHECK(totals.parts.total() == totals.latency().sum());
    CHECK(totals.parts[LatencyPart::hit] == 2000);
    CHECK(totals.parts[LatencyPart::wait_for_grant] == 9000);
    CHECK(totals.parts[LatencyPart::transfer] == 25000);
    CHECK(totals.parts[LatencyPart::snoop] == 5000);
    CHECK(totals.parts[LatencyPart::memory_array] == 60000);
  });
}

TEST_CASE("an owner's supply replaces the memory's time", "[bus]") {
  System system(load_table("dirty-owner-update"));
  simulate([&] {
    system.cpu(0).write(0x40, 1);
    sc_core::wait(1, sc_core::SC_US);
    system.cpu(1).read(0x40);
    CHECK(ns(system.cpu(1).delay) == Approx(1 + 4 + 10 + 5 + 2 * 5 + 20));
    CHECK(system.cache(1).totals().parts[LatencyPart::owner_supply] == 10000);
  });
}

TEST_CASE("an update costs address, snoop and the beats of its word", "[bus]") {
  System system(load_table("dirty-owner-update"));
  simulate([&] {
    system.cpu(0).read(0x40);
    sc_core::wait(1, sc_core::SC_US);
    system.cpu(0).write(0x40, 1);
    CHECK(ns(system.cpu(0).delay) == Approx(1 + 4 + 10 + 5 + 5));
  });
}

TEST_CASE("a second request waits for the first one's address phase, not for its data", "[bus]") {
  System system(load_table("dirty-owner-update"));
  simulate([&] {
    system.cpu(0).read(0x40);
    system.cpu(1).read(0x80);
    // the address bus is free at 15 ns, the memory, which is asked at 25 ns, at 80 ns
    CHECK(ns(system.cpu(1).delay) == Approx(80 + 60 + 20));
    const CacheTotals totals = system.cache(1).totals();
    CHECK(totals.parts[LatencyPart::wait_for_grant] == 14000);
    CHECK(totals.parts[LatencyPart::memory_queue] == 55000);
    CHECK(totals.parts.total() == totals.latency().sum());
  });
}

TEST_CASE("a victim's write-back does not delay the fetch it makes room for", "[bus]") {
  System system(load_table("dirty-owner-update"), {1, {32, 1, 32, Replacement::lru, 1}});
  simulate([&] {
    system.cpu(0).write(0x40, 1);
    sc_core::wait(1, sc_core::SC_US);
    system.cpu(0).read(0x80);
    CHECK(ns(system.cpu(0).delay) == Approx(1 + 4 + 10 + 5 + 60 + 20));
    CHECK(system.bus->totals().block_writes == 1);
  });
}

TEST_CASE("an initiator ahead in local time leaves the earlier gap to one behind", "[bus]") {
  System system(load_table("dirty-owner-update"), {2, {1024, 2, 32, Replacement::lru, 1}, {{"memory", 0, 0, true, 0}}, false});
  simulate([&] {
    std::uint32_t value = 0;
    tlm::tlm_generic_payload payload;
    payload.set_command(tlm::TLM_READ_COMMAND);
    payload.set_address(0x40);
    payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
    payload.set_data_length(4);
    payload.set_streaming_width(4);
    sc_core::sc_time ahead(900, sc_core::SC_NS);
    system.cpu(0).socket->b_transport(payload, ahead);
    payload.set_address(0x80);
    sc_core::sc_time behind(0, sc_core::SC_NS);
    system.cpu(1).socket->b_transport(payload, behind);
    CHECK(ns(behind) == Approx(100));
  });
}

TEST_CASE("busy times are the cycles the totals count", "[bus]") {
  System system(load_table("dragon"), {4, {256, 2, 32, Replacement::lru, 1}});
  simulate([&] {
    for (std::uint32_t i = 0; i < 500; ++i) {
      const int cpu = static_cast<int>(i * 7 % 4);
      const std::uint64_t address = i * 13 % 32 * 16;
      if (i % 3 == 0)
        system.cpu(cpu).write(address, i);
      else
        system.cpu(cpu).read(address);
      sc_core::wait(system.cpu(cpu).delay);
    }
    const SnoopingBusTotals totals = system.bus->totals();
    std::uint64_t address_cycles = 0, data_cycles = 0;
    for (const BusKindTotals& kind : totals.kind) {
      address_cycles += kind.address_cycles;
      data_cycles += kind.data_cycles;
    }
    CHECK(totals.address_busy == address_cycles * 5000);
    CHECK(totals.data_busy == data_cycles * 5000);
    CHECK(totals.supplied_by_memory + totals.supplied_by_owner + totals.supplied_by_sharer ==
          system.count(BusKind::read) + system.count(BusKind::read_exclusive));
    CHECK(totals.block_reads == totals.supplied_by_memory);
    for (int i = 0; i < 4; ++i)
      CHECK(system.cache(i).totals().parts.total() == system.cache(i).totals().latency().sum());
  });
}

TEST_CASE("a split bus has one transaction of a line under way at a time, annotated as arbitrated", "[bus]") {
  SystemOptions options;
  options.caches = 4;
  System system(load_table("dirty-owner-update"), options);
  simulate([&] {
    for (int i = 0; i < 4; ++i) system.cpu(i).read(i == 2 ? 0x200 : 0x100);
    sc_core::wait(sc_core::sc_time(1, sc_core::SC_US));
    // Lookup to 1 ns, the next edge is 5, arbitration to 10; then address, snoop and one beat, 5 ns each.
    system.cpu(0).write(0x100, 1);
    CHECK(system.cpu(0).delay == sc_core::sc_time(25, sc_core::SC_NS));
    system.cpu(1).write(0x100, 2);  // waits for the end of the first
    CHECK(system.cpu(1).delay == sc_core::sc_time(40, sc_core::SC_NS));
    system.cpu(2).write(0x200, 3);  // waits for the address bus only, 15 to 20
    CHECK(system.cpu(2).delay == sc_core::sc_time(30, sc_core::SC_NS));
  });
}

TEST_CASE("a read before the grant of the write that takes its copy is a hit", "[bus]") {
  System system(load_table("mesi"));
  simulate([&] {
    system.cpu(0).read(0x100);
    system.cpu(1).read(0x100);
    sc_core::wait(sc_core::sc_time(1, sc_core::SC_US));
    system.cpu(0).write(0x100, 7);  // granted at 10 ns
    const std::string states = system.states(0x100);
    CHECK(system.cpu(1).read(0x100) == 7);
    CHECK(system.cpu(1).delay == sc_core::sc_time(1, sc_core::SC_NS));
    CHECK(system.states(0x100) == states);
    CHECK(system.cache(1).totals().hits == 1);
    sc_core::wait(sc_core::sc_time(10, sc_core::SC_NS));
    CHECK(system.cpu(1).read(0x100) == 7);
    CHECK(system.cpu(1).delay > sc_core::sc_time(20, sc_core::SC_NS));
    CHECK(system.cache(1).totals().hits == 1);
  });
}

TEST_CASE("for an initiator that lets no time pass what is lost is lost", "[bus]") {
  System system(load_table("mesi"));
  simulate([&] {
    for (int i = 0; i < 5; ++i) {
      system.cpu(1).read(0x100);
      system.cpu(0).write(0x100, 7);
    }
  });
  CHECK(system.cache(1).totals().hits == 0);
}
