// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The supply path of a dirty owner, on real bytes. Common practice, no source: a read of a line dirty elsewhere is
// answered by the owner, the reader's copy is clean and memory untouched; each new writer takes ownership; however
// many writes there are, memory is written once, when the owner's copy is replaced.
#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

TEST_CASE("a dirty owner answers another cache's read and memory stays stale", "[cache]") {
  System system(load_table("dirty-owner-update"), {3});
  simulate([&] {
    system.cpu(0).write(0x40, 1);
    CHECK(system.states(0x40) == "D I I");
    CHECK(system.in_memory(0x40) == 0);
    CHECK(system.cpu(1).read(0x40) == 1);
    CHECK(system.states(0x40) == "D V I");
    CHECK(system.in_memory(0x40) == 0);
    CHECK(system.bus->totals().supplied_by_owner == 1);
    CHECK(system.bus->totals().supplied_by_memory == 1);  // the write miss of cache 0
  });
}

TEST_CASE("each new writer takes ownership from the previous one", "[cache]") {
  System system(load_table("dirty-owner-update"), {3});
  simulate([&] {
    for (int i = 0; i < 3; ++i) system.cpu(i).read(0x40);
    system.cpu(0).write(0x40, 10);
    CHECK(system.states(0x40) == "D V V");
    system.cpu(2).write(0x40, 12);
    CHECK(system.states(0x40) == "V V D");
    system.cpu(1).write(0x40, 11);
    CHECK(system.states(0x40) == "V D V");
    for (int i = 0; i < 3; ++i) CHECK(system.cpu(i).read(0x40) == 11);
    CHECK(system.in_memory(0x40) == 0);
    CHECK(system.bus->totals().block_writes == 0);
  });
}

TEST_CASE("however many writes, memory is written once, when the last writer's copy is replaced", "[cache]") {
  System system(load_table("dirty-owner-update"));
  simulate([&] {
    for (std::uint32_t i = 1; i <= 100; ++i) system.cpu(static_cast<int>(i % 2)).write(0x40, i);
    CHECK(system.bus->totals().block_writes + system.bus->totals().word_writes == 0);
    CHECK(system.cache(1).replace(0x40, sc_core::SC_ZERO_TIME) == tlm::TLM_OK_RESPONSE);  // the clean copy: writes nothing
    CHECK(system.bus->totals().block_writes == 0);
    CHECK(system.cache(0).replace(0x40, sc_core::SC_ZERO_TIME) == tlm::TLM_OK_RESPONSE);
    CHECK(system.bus->totals().block_writes == 1);
    CHECK(system.in_memory(0x40) == 100);
    CHECK(system.states(0x40) == "I I");
  });
}

TEST_CASE("the write-through baseline writes memory once for every write", "[cache]") {
  System system(load_table("write-through-update"));
  simulate([&] {
    for (std::uint32_t i = 1; i <= 100; ++i) {
      system.cpu(static_cast<int>(i % 2)).write(0x40, i);
      CHECK(system.in_memory(0x40) == i);
    }
    CHECK(system.bus->totals().word_writes == 100);
    system.cache(0).replace(0x40, sc_core::SC_ZERO_TIME);
    system.cache(1).replace(0x40, sc_core::SC_ZERO_TIME);
    CHECK(system.bus->totals().block_writes == 0);
  });
}

TEST_CASE("a victim that is owned is written back, a clean one is not", "[cache]") {
  System system(load_table("dirty-owner-update"), {1, {64, 1, 32, Replacement::lru, 1}});  // two sets of one line
  simulate([&] {
    system.cpu(0).write(0x00, 1);
    system.cpu(0).read(0x20);
    system.cpu(0).read(0x60);  // displaces the clean 0x20
    CHECK(system.bus->totals().block_writes == 0);
    system.cpu(0).read(0x40);  // displaces the dirty 0x00
    CHECK(system.bus->totals().block_writes == 1);
    CHECK(system.in_memory(0x00) == 1);
    CHECK(system.cpu(0).read(0x00) == 1);
  });
}

TEST_CASE("an updating cache refuses a table of the invalidate family and says which cache to use", "[cache]") {
  CacheConfig config;
  config.table = std::make_shared<const Table>(load_table("mesi"));
  CHECK_THROWS_WITH(UpdatingCache("cache", config),
                    Catch::Contains("cache\n  protocol: 'mesi' belongs to the invalidate family: use an InvalidatingCache"));
  config.table = nullptr;
  config.geometry.line_bytes = 48;
  CHECK_THROWS_WITH(InvalidatingCache("other", config),
                    Catch::Contains("other\n  line: 48 bytes; expected a power of two from 8 to 256\n  protocol: no table"));
}

TEST_CASE("competitive update drops a copy that is updated often enough without a local use", "[cache]") {
  for (const int limit : {3}) {
    System system(load_table("competitive-update", limit));
    simulate([&] {
      system.cpu(1).read(0x40);
      system.cpu(0).read(0x40);
      system.cpu(0).write(0x40, 1);
      system.cpu(0).write(0x40, 2);
      CHECK(system.cpu(1).read(0x40) == 2);  // a use: the count starts again
      system.cpu(0).write(0x40, 3);
      system.cpu(0).write(0x40, 4);
      CHECK(system.cache(1).state_of(0x40) != "I");
      system.cpu(0).write(0x40, 5);
      CHECK(system.cache(1).state_of(0x40) == "I");
      const auto updates = system.count(BusKind::update);
      system.cpu(0).write(0x40, 6);  // alone now: off the bus
      CHECK(system.count(BusKind::update) == updates);
      CHECK(system.cpu(1).read(0x40) == 6);
    });
  }
}
