// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a transaction of arbitrated timing costs the kernel.
#include <catch2/catch.hpp>

#include "simulated.h"
#include "speed/four_phases.h"

namespace earshot::test {
namespace {

TEST_CASE("a miss in arbitrated timing takes at most four kernel events") {
  SnoopingBusConfig bus_config;
  bus_config.timing = BusTiming::arbitrated;
  bus_config.windows = {{"memory", 0, 0, true, 0}};
  SnoopingBus bus("bus", bus_config);
  PlainMemory memory("memory", PlainMemoryConfig{});
  CacheConfig config;
  config.table = std::make_shared<const Table>(load_table("dirty-owner-update"));
  UpdatingCache cache("cache", config);
  Walker walker("walker");  // no process of its own: every delta cycle is the cache's or the bus's
  bus.window_socket("memory").bind(memory.target_socket);
  cache.bus_socket.bind(bus.cache_socket);
  walker.socket.bind(cache.cpu_socket);

  sc_core::sc_start(sc_core::SC_ZERO_TIME);
  const auto before = sc_core::sc_delta_count();
  constexpr std::uint64_t misses = 1000;
  walker.run(misses);
  CHECK(cache.totals().misses == misses);
  // And the watch for stalls, once.
  CHECK(sc_core::sc_delta_count() - before <= 4 * misses + 1);
}

}  // namespace
}  // namespace earshot::test
