// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The insertion itself: what an engineer adds to a platform's top. A test counts the lines between the two
// marks.
#include "outside/clients/insertion.h"
// insertion begins
#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/updating_cache.h"
// insertion pauses
#include "earshot/cache/invalidating_cache.h"

namespace earshot::test {
namespace {

std::string window(std::size_t target) {
  return "target" + std::to_string(target);
}

std::unique_ptr<CoherentCache> make_cache(std::size_t number, const CacheConfig& config) {
  const std::string name = "cache" + std::to_string(number);
  if (config.table->family() == Family::update) return std::make_unique<UpdatingCache>(name.c_str(), config);
  return std::make_unique<InvalidatingCache>(name.c_str(), config);
}

}  // namespace

void ClientRun::insert(const std::vector<tlm::tlm_initiator_socket<>*>& initiators,
                       const std::vector<tlm::tlm_target_socket<>*>& targets, unsigned shift) {
  // insertion goes on
  for (std::uint64_t j = 0; j < targets.size(); ++j)
    bus.windows.push_back({window(j), j << shift, std::uint64_t{1} << shift, place != Place::uncached, 0});
  snooping_bus = std::make_unique<SnoopingBus>("snooping_bus", bus);
  for (std::size_t j = 0; j < targets.size(); ++j) snooping_bus->window_socket(window(j)).bind(*targets[j]);
  CacheConfig cache;
  cache.table = std::make_shared<const Table>(load_table(protocol));
  for (std::size_t i = 0; i < initiators.size(); ++i) {
    caches.push_back(make_cache(i, cache));
    caches[i]->bus_socket.bind(snooping_bus->cache_socket);
    initiators[i]->bind(caches[i]->cpu_socket);
  }
  // insertion ends
  for (const auto& each : caches) each->set_observer(monitor.get());
}

}  // namespace earshot::test
