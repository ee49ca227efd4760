// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>

#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

TEST_CASE("every problem of a bus configuration is reported at once, with the module's name", "[bus]") {
  SnoopingBusConfig config;
  config.windows = {{"a", 0, 0x1000, true, 0}, {"b", 0x800, 0x1000, true, 0}};
  config.width_bytes = 12;
  config.clock = sc_core::SC_ZERO_TIME;
  CHECK_THROWS_WITH(SnoopingBus("the_bus", config),
                    Catch::Contains("the_bus\n"
                                    "  window 'b' [0x800, 0x17ff] overlaps window 'a' [0x0, 0xfff]: windows must be disjoint\n"
                                    "  clock: the period must be longer than 0\n"
                                    "  width: 12 bytes; expected a power of two from 1 to 256"));
}

TEST_CASE("caches with different lines on one bus are a configuration error", "[bus]") {
  SnoopingBusConfig config;
  config.windows = {{"memory", 0, 0, true, 0}};
  SnoopingBus bus("bus", config);
  PlainMemory memory("memory", {});
  bus.window_socket("memory").bind(memory.target_socket);
  CacheConfig one;
  one.table = std::make_shared<const Table>(load_table("dragon"));
  CacheConfig two = one;
  two.geometry.line_bytes = 64;
  UpdatingCache first("first", one), second("second", two);
  Driver cpu0("cpu0"), cpu1("cpu1");
  cpu0.socket.bind(first.cpu_socket);
  cpu1.socket.bind(second.cpu_socket);
  first.bus_socket.bind(bus.cache_socket);
  second.bus_socket.bind(bus.cache_socket);
  CHECK_THROWS_WITH(sc_core::sc_start(sc_core::SC_ZERO_TIME),
                    Catch::Contains("the cache at port 1 has lines of 64 bytes, the one at port 0 of 32"));
}

TEST_CASE("a cache bound to no bus is named by the kernel before simulation", "[bus]") {
  CacheConfig config;
  config.table = std::make_shared<const Table>(load_table("dragon"));
  UpdatingCache cache("lonely", config);
  Driver cpu("cpu");
  cpu.socket.bind(cache.cpu_socket);
  CHECK_THROWS_WITH(sc_core::sc_start(sc_core::SC_ZERO_TIME), Catch::Contains("lonely.bus_socket"));
}

TEST_CASE("a bus without caches is named by the kernel before simulation", "[bus]") {
  SnoopingBusConfig config;
  config.windows = {{"memory", 0, 0, true, 0}};
  SnoopingBus bus("deserted", config);
  PlainMemory memory("memory", {});
  bus.window_socket("memory").bind(memory.target_socket);
  CHECK_THROWS_WITH(sc_core::sc_start(sc_core::SC_ZERO_TIME), Catch::Contains("deserted.cache_socket"));
}

TEST_CASE("an unknown window's name is a configuration error", "[bus]") {
  SnoopingBusConfig config;
  config.windows = {{"memory", 0, 0, true, 0}};
  SnoopingBus bus("bus", config);
  CHECK_THROWS_WITH(bus.window_socket("rom"), Catch::Contains("bus: no window is named 'rom'"));
}
