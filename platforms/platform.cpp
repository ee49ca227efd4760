// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#define SC_INCLUDE_DYNAMIC_PROCESSES
#include "platform.h"

#include <algorithm>
#include <sstream>

#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/traffic/pattern.h"

namespace earshot {
namespace {

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
                    std::to_string(caches_) + " caches: set caches.count to " + std::to_string(first + 1) +
                    " or more");
  }

 private:
  std::unique_ptr<RecordingReader> reader_;
  unsigned caches_;
};

}  // namespace

Platform::Platform(const Settings& settings, std::shared_ptr<const Table> table,
                   const PlayerHooks& progress) {
  build_bus(settings);
  build_memories(settings);
  build_caches(settings, table);
  build_players(settings, progress);
  if (settings.watched()) build_monitor(settings);
  sc_core::sc_spawn([this] { flush(); }, "flusher");
}

void Platform::build_bus(const Settings& settings) {
  SnoopingBusConfig config;
  config.windows = settings.windows;
  config.timing = settings.timing;
  config.structure = settings.structure;
  config.clock = from_ps(settings.bus_clock);
  config.width_bytes = settings.bus_width;
  config.arbitration_cycles = settings.arbitration_cycles;
  config.address_cycles = settings.address_cycles;
  config.snoop_cycles = settings.snoop_cycles;
  config.supply_cycles = settings.supply_cycles;
  config.turnaround_cycles = settings.turnaround_cycles;
  config.arbiter = settings.arbiter;
  config.outstanding = settings.bus_outstanding;
  config.stall_cycles = settings.stall_cycles;
  bus_ = std::make_unique<SnoopingBus>("bus", config);
}

void Platform::build_memories(const Settings& settings) {
  for (const Window& window : settings.windows) {
    memories_.push_back(std::make_unique<WindowMemory>(window, settings));
    bus_->window_socket(window.name).bind(memories_.back()->target_socket());
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
    config.misses = settings.misses;
    config.write_back_slots = settings.write_back_slots;
    if (table->family() == Family::update)
      caches_.push_back(std::make_unique<UpdatingCache>(name.c_str(), config));
    else
      caches_.push_back(std::make_unique<InvalidatingCache>(name.c_str(), config));
    caches_.back()->bus_socket.bind(bus_->cache_socket);
  }
}

void Platform::build_players(const Settings& settings, PlayerHooks hooks) {
  if (settings.packed) packed_ = std::make_unique<PackedAddresses>(settings.recording, settings.windows);
  hooks.replace = [this](std::uint32_t initiator, std::uint64_t address, const sc_core::sc_time& delay) {
    const tlm::tlm_response_status status = caches_[initiator]->replace(address, delay);
    if (status != tlm::TLM_OK_RESPONSE)
      throw PlayError("memory refused the write-back that a replace of initiator " +
                      std::to_string(initiator) + " caused");
  };
  hooks.finished = [this] {
    if (--playing_ == 0) sc_core::sc_pause();
  };
  const bool concurrent = settings.order == Order::concurrent;
  playing_ = concurrent ? settings.caches : 1;
  for (unsigned i = 0; i < settings.caches; ++i) {
    const std::string name = "player" + std::to_string(i);
    const ThinkTime think(from_ps(settings.think), settings.think_spread,
                          SplitMix64::mix(settings.pattern.seed + i));
    if (settings.in_flight > 1) {
      non_blocking_players_.push_back(
          std::make_unique<NonBlockingPlayer>(name.c_str(), i, settings.in_flight, think, hooks));
      non_blocking_players_.back()->initiator_socket.bind(caches_[i]->cpu_socket);
      non_blocking_players_.back()->set_source(stream(settings, i));
    } else {
      players_.push_back(std::make_unique<Player>(name.c_str(), i, think, hooks));
      players_.back()->initiator_socket.bind(caches_[i]->cpu_socket);
      if (concurrent) players_.back()->set_source(stream(settings, i));
    }
  }
  if (!concurrent) build_recorded_order(settings, hooks);
}

void Platform::build_recorded_order(const Settings& settings, const PlayerHooks& hooks) {
  std::vector<Player*> players;
  for (const auto& player : players_) players.push_back(player.get());
  std::unique_ptr<AccessSource> source;
  bool exact_values = false;  // and told in the order they came about
  if (settings.uses_pattern) {
    source = make_pattern(settings.pattern);
  } else {
    auto recording = open_recording(settings.recording);
    exact_values = recording->notes().exact_order;
    source = placed(std::move(recording));
  }
  recorded_order_ =
      std::make_unique<RecordedOrder>("recorded_order", players, std::move(source), exact_values, hooks);
}

// What one initiator plays in concurrent order.
std::unique_ptr<AccessSource> Platform::stream(const Settings& settings, unsigned initiator) const {
  if (settings.uses_pattern) return make_pattern(settings.pattern, initiator);
  auto recording = open_recording(settings.recording, initiator);
  if (initiator > 0) return placed(std::move(recording));
  return placed(std::make_unique<FirstInitiator>(std::move(recording), settings.caches));
}

std::unique_ptr<AccessSource> Platform::placed(std::unique_ptr<AccessSource> source) const {
  return packed_ == nullptr ? std::move(source) : packed_->moved(std::move(source));
}

void Platform::build_monitor(const Settings& settings) {
  monitor_ = std::make_unique<CoherenceMonitor>(
      settings.geometry.line_bytes, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
        const int window = bus_->address_map().find(address, length);
        memories_[static_cast<std::size_t>(window)]->peek(address, to, length);
      });
  for (const auto& cache : caches_) cache->set_observer(monitor_.get());
}

template <typename Do>
void Platform::for_each_end(Do what) const {
  if (recorded_order_ != nullptr) what(recorded_order_->end());
  for (const auto& player : players_) what(player->end());
  for (const auto& player : non_blocking_players_) what(player->end());
}

Picoseconds Platform::finished_at() const {
  Picoseconds last = 0;
  for_each_end([&](const PlayerEnd& end) {
    if (end.error != nullptr) std::rethrow_exception(end.error);
    last = std::max(last, to_ps(end.at));
  });
  return last;
}

std::string Platform::players_waiting() const {
  std::string text;
  const auto add = [&](const sc_core::sc_object& player, const std::string& accesses) {
    std::istringstream lines(accesses);
    for (std::string line; std::getline(lines, line);)
      text += std::string(player.name()) + ": waits for its access: " + line + "\n";
  };
  for (const auto& player : players_) add(*player, player->waiting());
  for (const auto& player : non_blocking_players_) add(*player, player->waiting());
  return text;
}

std::string Platform::memories_waiting() const {
  std::string text;
  for (const WindowMemory* memory : cached_memories_)
    if (memory->dram() != nullptr)
      for (const std::string& line : memory->dram()->pending()) text += line + "\n";
  return text;
}

void Platform::flush() {
  sc_core::wait(flush_);
  sc_core::sc_time delay;
  for (const auto& cache : caches_) cache->flush(delay);
  flushed_ = true;
  sc_core::sc_pause();
}

}  // namespace earshot
