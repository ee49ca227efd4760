// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The insertion itself: what an engineer adds to a platform's top. A test counts the lines between the marks.
// Outside of them is what only the test needs: its choice of timing and kind of cache, and the monitor.
#include "outside/clients/insertion.h"
// insertion begins
#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/updating_cache.h"
// insertion pauses
#include "earshot/cache/invalidating_cache.h"

namespace earshot::test {
namespace {

std::unique_ptr<CoherentCache> make_cache(std::size_t number, const CacheConfig& config) {
  const std::string name = "cache" + std::to_string(number);
  if (config.table->family() == Family::update) return std::make_unique<UpdatingCache>(name.c_str(), config);
  return std::make_unique<InvalidatingCache>(name.c_str(), config);
}

}  // namespace

void ClientRun::insert(const std::vector<tlm::tlm_initiator_socket<>*>& initiators,
                       const std::vector<tlm::tlm_target_socket<>*>& targets, unsigned shift) {
  const auto window = [&](std::uint64_t j) {
    const bool cached = place != Place::uncached;
    return Window{"target" + std::to_string(j), j << shift, std::uint64_t{1} << shift, cached, 0};
  };
  // insertion goes on
  SnoopingBusConfig bus_config;
  for (std::size_t j = 0; j < targets.size(); ++j) bus_config.windows.push_back(window(j));
  // insertion pauses
  bus_config.timing = timing;
  // insertion goes on
  SnoopingBus& bus = *(snooping_bus = std::make_unique<SnoopingBus>("snooping_bus", bus_config));
  for (std::size_t j = 0; j < targets.size(); ++j) bus.window_socket(window(j).name).bind(*targets[j]);
  CacheConfig cache_config;
  cache_config.table = std::make_shared<const Table>(load_table(protocol));
  for (std::size_t i = 0; i < initiators.size(); ++i) {
    CoherentCache& cache = *caches.emplace_back(make_cache(i, cache_config));
    cache.bus_socket.bind(bus.cache_socket);
    initiators[i]->bind(cache.cpu_socket);
  }
  // insertion ends
  for (const auto& cache : caches) cache->set_observer(monitor.get());
}

}  // namespace earshot::test
