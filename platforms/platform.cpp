// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "platform.h"

#include <algorithm>

#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/traffic/pattern.h"

namespace earshot {
namespace {

std::unique_ptr<AccessSource> open_source(const Settings& settings, std::uint32_t only) {
  if (settings.uses_pattern) return make_pattern(settings.pattern, only);
  return open_recording(settings.recording, only);
}

// One initiator's accesses of a recording, refusing a recording that has initiators without a cache: in concurrent
// order nobody plays those, so nobody else would notice.
class FirstInitiator : public AccessSource {
 public:
  FirstInitiator(std::unique_ptr<RecordingReader> reader, unsigned caches)
      : reader_(std::move(reader)), caches_(caches) {}
  bool next(Access& access) override {
    const bool more = reader_->next(access);
    const std::uint64_t without_cache = caches_ < 64 ? reader_->initiators_seen() >> caches_ : 0;
    if (without_cache == 0) return more;
    const int first = static_cast<int>(caches_) + __builtin_ctzll(without_cache);
    throw PlayError("has accesses of initiator " + std::to_string(first) + ", but there are only " +
                    std::to_string(caches_) + " caches: set caches.count to " + std::to_string(first + 1) + " or more");
  }

 private:
  std::unique_ptr<RecordingReader> reader_;
  unsigned caches_;
};

}  // namespace

Platform::Platform(const Settings& settings, std::shared_ptr<const Table> table, const PlayerHooks& progress) {
  SnoopingBusConfig config;
  config.windows = settings.windows;
  config.clock = from_ps(settings.bus_clock);
  config.width_bytes = settings.bus_width;
  config.arbitration_cycles = settings.arbitration_cycles;
  config.address_cycles = settings.address_cycles;
  config.snoop_cycles = settings.snoop_cycles;
  config.supply_cycles = settings.supply_cycles;
  bus_ = std::make_unique<SnoopingBus>("bus", config);

  build_memories(settings);
  build_caches(settings, table);
  build_players(settings, progress);
  if (!settings.watched()) return;
  monitor_ = std::make_unique<CoherenceMonitor>(
      settings.geometry.line_bytes, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
        const int window = bus_->address_map().find(address, length);
        memories_[static_cast<std::size_t>(window)]->peek(address, to, length);
      });
  for (const auto& cache : caches_) cache->set_observer(monitor_.get());
}

void Platform::build_memories(const Settings& settings) {
  PlainMemoryConfig config;
  config.read_latency = from_ps(settings.read_latency);
  config.write_latency = from_ps(settings.write_latency);
  config.beat_time = from_ps(settings.beat_time);
  config.beat_bytes = settings.beat_bytes;
  for (const Window& window : settings.windows) {
    memories_.push_back(std::make_unique<PlainMemory>(("memory_" + window.name).c_str(), config));
    bus_->window_socket(window.name).bind(memories_.back()->target_socket);
    if (window.cached) cached_memories_.push_back(memories_.back().get());
  }
}

void Platform::build_caches(const Settings& settings, const std::shared_ptr<const Table>& table) {
  for (unsigned i = 0; i < settings.caches; ++i) {
    const std::string name = "cache" + std::to_string(i);
    CacheConfig config;
    config.geometry = settings.geometry;
    config.geometry.seed += i;
    config.table = table;
    config.hit_time = from_ps(settings.hit_time);
    if (table->family() == Family::update)
      caches_.push_back(std::make_unique<UpdatingCache>(name.c_str(), config));
    else
      caches_.push_back(std::make_unique<InvalidatingCache>(name.c_str(), config));
    caches_.back()->bus_socket.bind(bus_->cache_socket);
  }
}

void Platform::build_players(const Settings& settings, PlayerHooks hooks) {
  hooks.replace = [this](std::uint32_t initiator, std::uint64_t address, const sc_core::sc_time& delay) {
    const tlm::tlm_response_status status = caches_[initiator]->replace(address, delay);
    if (status != tlm::TLM_OK_RESPONSE)
      throw PlayError("memory refused the write-back that a replace of initiator " + std::to_string(initiator) +
                      " caused");
  };
  std::vector<Player*> players;
  for (unsigned i = 0; i < settings.caches; ++i) {
    players_.push_back(std::make_unique<Player>(("player" + std::to_string(i)).c_str(), i, from_ps(settings.think),
                                                hooks));
    players_.back()->initiator_socket.bind(caches_[i]->cpu_socket);
    players.push_back(players_.back().get());
    if (settings.order == Order::recorded) continue;
    if (i == 0 && !settings.uses_pattern)
      players_.back()->set_source(
          std::make_unique<FirstInitiator>(open_recording(settings.recording, 0), settings.caches));
    else
      players_.back()->set_source(open_source(settings, i));
  }
  if (settings.order == Order::concurrent) return;
  std::unique_ptr<AccessSource> source;
  bool exact_values = false;  // and told in the order they came about
  if (settings.uses_pattern) {
    source = make_pattern(settings.pattern);
  } else {
    auto recording = open_recording(settings.recording);
    exact_values = recording->notes().exact_order;
    source = std::move(recording);
  }
  recorded_order_ =
      std::make_unique<RecordedOrder>("recorded_order", players, std::move(source), exact_values, hooks);
}

Picoseconds Platform::finished_at() const {
  Picoseconds last = 0;
  if (recorded_order_ != nullptr) {
    if (recorded_order_->error()) std::rethrow_exception(recorded_order_->error());
    last = to_ps(recorded_order_->finished_at());
  }
  for (const auto& player : players_) {
    if (player->error()) std::rethrow_exception(player->error());
    last = std::max(last, to_ps(player->finished_at()));
  }
  return last;
}

}  // namespace earshot
