// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Speed as ratios within one run, so that they mean something on any machine. Nothing here is asserted.
#include <benchmark/benchmark.h>
#include <sys/wait.h>
#include <tlm_utils/simple_initiator_socket.h>
#include <tlm_utils/simple_target_socket.h>
#include <unistd.h>

#include <algorithm>
#include <chrono>
#include <cstdio>
#include <cstring>
#include <map>
#include <systemc>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/dram/dram_controller.h"
#include "earshot/dram/plain_memory.h"
#include "four_phases.h"
#include "platform.h"

namespace earshot {
namespace {

// What a platform has before Earshot: a memory on the standard convenience socket.
class SimpleMemory : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<SimpleMemory> target_socket{"target_socket"};
  explicit SimpleMemory(sc_core::sc_module_name name) : sc_module(name), bytes_(1 << 16) {
    target_socket.register_b_transport(this, &SimpleMemory::b_transport);
  }

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
    const std::uint64_t address = payload.get_address();
    const unsigned length = payload.get_data_length();
    if (address >= bytes_.size() || length > bytes_.size() - address) {
      payload.set_response_status(tlm::TLM_ADDRESS_ERROR_RESPONSE);
      return;
    }
    if (payload.get_byte_enable_ptr() != nullptr || payload.get_streaming_width() < length) {
      payload.set_response_status(tlm::TLM_BURST_ERROR_RESPONSE);
      return;
    }
    if (payload.is_read())
      std::memcpy(payload.get_data_ptr(), &bytes_[address], length);
    else if (payload.is_write())
      std::memcpy(&bytes_[address], payload.get_data_ptr(), length);
    delay += latency_;
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  std::vector<std::uint8_t> bytes_;
  sc_core::sc_time latency_{10, sc_core::SC_NS};
};

class Initiator : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Initiator> socket{"socket"};
  explicit Initiator(sc_core::sc_module_name name) : sc_module(name) {}

  // The time runs on with every access, as it does in a real initiator.
  void access(tlm::tlm_command command, std::uint64_t address) {
    payload_.set_command(command);
    payload_.set_address(address);
    payload_.set_data_ptr(data_);
    payload_.set_data_length(4);
    payload_.set_streaming_width(4);
    payload_.set_byte_enable_ptr(nullptr);
    payload_.set_dmi_allowed(false);
    payload_.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    socket->b_transport(payload_, delay_);
    if (payload_.is_response_error()) std::abort();
  }
  sc_core::sc_time& delay() { return delay_; }

 private:
  tlm::tlm_generic_payload payload_;
  alignas(8) unsigned char data_[8] = {};
  sc_core::sc_time delay_;
};

// `count` caches on one bus with a memory, and an initiator for each.
struct Machine {
  Machine(const std::string& name, const std::string& protocol, int count, std::uint64_t cache_bytes)
      : bus((name + "_bus").c_str(), bus_config(BusTiming::annotated)), memory((name + "_memory").c_str(), PlainMemoryConfig{}) {
    bus.window_socket("memory").bind(memory.target_socket);
    CacheConfig config;
    config.geometry.size_bytes = cache_bytes;
    config.table = std::make_shared<const Table>(load_table(protocol));
    for (int i = 0; i < count; ++i) {
      const std::string number = std::to_string(i);
      if (config.table->family() == Family::update)
        caches.push_back(std::make_unique<UpdatingCache>((name + "_cache" + number).c_str(), config));
      else
        caches.push_back(std::make_unique<InvalidatingCache>((name + "_cache" + number).c_str(), config));
      initiators.push_back(std::make_unique<Initiator>((name + "_initiator" + number).c_str()));
      initiators.back()->socket.bind(caches.back()->cpu_socket);
      caches.back()->bus_socket.bind(bus.cache_socket);
    }
  }
  static SnoopingBusConfig bus_config(BusTiming timing) {
    SnoopingBusConfig config;
    config.timing = timing;
    config.windows = {{"memory", 0, 0, true, 0}};
    return config;
  }
  SnoopingBus bus;
  PlainMemory memory;
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Initiator>> initiators;

  // One access at the machine's local time, which runs on to the latest end of a round over the initiators. Every
  // 1000th access simulation time catches up, as at a quantum's end.
  void access(std::size_t who, tlm::tlm_command command, std::uint64_t address) {
    Initiator& initiator = *initiators[who];
    initiator.delay() = round_start_;
    initiator.access(command, address);
    round_end_ = std::max(round_end_, initiator.delay());
    if (who + 1 < initiators.size()) return;
    round_start_ = round_end_;
    if ((rounds_ += initiators.size()) < 1000) return;
    rounds_ = 0;
    sc_core::sc_start(round_end_);
    round_start_ = round_end_ = sc_core::SC_ZERO_TIME;
  }

 private:
  sc_core::sc_time round_start_, round_end_;
  std::size_t rounds_ = 0;
};

// One cache in arbitrated timing before a walker.
struct ArbitratedMachine {
  ArbitratedMachine() {
    bus.window_socket("memory").bind(memory.target_socket);
    cache.bus_socket.bind(bus.cache_socket);
    walker.socket.bind(cache.cpu_socket);
  }
  static CacheConfig cache_config() {
    CacheConfig config;
    config.table = std::make_shared<const Table>(load_table("dirty-owner-update"));
    return config;
  }
  SnoopingBus bus{"arbitrated_bus", Machine::bus_config(BusTiming::arbitrated)};
  PlainMemory memory{"arbitrated_memory", PlainMemoryConfig{}};
  UpdatingCache cache{"arbitrated_cache", cache_config()};
  Walker walker{"walker"};
};

DramConfig dram_config() {
  DramConfig config;
  config.grade = load_grade("ddr4-2400t");
  return config;
}

// Fork a child that replays the recording once; returns the seconds its simulation took.
double replay_seconds(const Settings& settings) {
  int ends[2];
  if (pipe(ends) != 0) std::abort();
  const pid_t child = fork();
  if (child == 0) {
    PlayerHooks hooks;
    tlm::tlm_global_quantum::instance().set(from_ps(settings.quantum));
    Platform platform(settings, std::make_shared<const Table>(load_table(settings.protocol)), hooks);
    const auto start = std::chrono::steady_clock::now();
    sc_core::sc_start();
    const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
    platform.finished_at();
    if (write(ends[1], &seconds, sizeof seconds) != sizeof seconds) _exit(1);
    _exit(0);
  }
  close(ends[1]);
  double seconds = 0;
  const bool got = read(ends[0], &seconds, sizeof seconds) == sizeof seconds;
  close(ends[0]);
  waitpid(child, nullptr, 0);
  if (!got) std::abort();
  return seconds;
}

double decode_seconds(const std::string& path, std::uint64_t& accesses) {
  const auto start = std::chrono::steady_clock::now();
  const auto reader = open_recording(path);
  Access access;
  std::uint64_t sum = 0;
  for (accesses = 0; reader->next(access); ++accesses) sum += access.address + access.value;
  benchmark::DoNotOptimize(sum);
  return std::chrono::duration<double>(std::chrono::steady_clock::now() - start).count();
}

// The demo recording in both orders against only decoding it. Before anything is elaborated: children simulate.
void measure_replay() {
  const std::string path = std::string("/tmp/earshot-speed-") + std::to_string(getpid()) + ".earshot";
  convert_recording(EARSHOT_SOURCE "/configs/recordings/sonar-buoy.earshot.zst", path);
  std::uint64_t accesses = 0;
  double decode = 1e9, recorded = 1e9, concurrent = 1e9;
  for (int i = 0; i < 5; ++i) {
    decode = std::min(decode, decode_seconds(path, accesses));
    const std::string source = "--workload.recording=" + path;
    concurrent = std::min(concurrent, replay_seconds(read_settings("", {source, "--workload.order=concurrent"})));
    recorded = std::min(recorded, replay_seconds(read_settings("", {source, "--monitor=off"})));
  }
  double arbitrated = 1e9;
  for (int i = 0; i < 3; ++i)
    arbitrated = std::min(arbitrated, replay_seconds(read_settings("", {"--workload.recording=" + path, "--timing=arbitrated",
                                                                        "--workload.order=concurrent"})));
  std::remove(path.c_str());
  const double each = 1e9 / static_cast<double>(accesses);
  std::printf("demo recording, binary: decode %.1f ns an access, replay concurrent %.1f ns, recorded order %.1f ns\n",
              decode * each, concurrent * each, recorded * each);
  std::printf("  %-64s %5.2f  (at most 6)\n", "replay, concurrent / decode only", concurrent / decode);
  std::printf("  %-64s %5.2f  (at most 6)\n", "replay, recorded order without monitor / decode only", recorded / decode);
  std::printf("  %-64s %5.2f  (at most 8)\n\n", "replay, concurrent, arbitrated / annotated", arbitrated / concurrent);
}

// Remembers the time of every benchmark besides printing it.
class Ratios : public benchmark::ConsoleReporter {
 public:
  void ReportRuns(const std::vector<Run>& runs) override {
    ConsoleReporter::ReportRuns(runs);
    for (const Run& run : runs)
      if (run.aggregate_name == "median") times[run.run_name.function_name] = run.GetAdjustedCPUTime();
  }
  void print(const char* what, const char* over, const char* under, double limit) const {
    std::printf("  %-64s %5.2f  (at most %g)\n", what, times.at(over) / times.at(under), limit);
  }
  std::map<std::string, double> times;
};

}  // namespace
}  // namespace earshot

int sc_main(int argc, char* argv[]) {
  using namespace earshot;
  measure_replay();

  SimpleMemory simple("simple");
  Initiator direct("direct");
  direct.socket.bind(simple.target_socket);
  Machine one("one", "dirty-owner-update", 1, 16 * 1024);
  Machine two("two", "dirty-owner-update", 2, 16 * 1024);
  Machine few("few", "mesi", 2, 1024);
  Machine many("many", "mesi", 64, 1024);
  BareInitiator bare_initiator("bare_initiator");
  BareTarget bare_target("bare_target");
  bare_initiator.socket.bind(bare_target.target_socket);
  WaitingInitiator waiting_initiator("waiting_initiator");
  WaitingTarget waiting_target("waiting_target");
  waiting_initiator.socket.bind(waiting_target.target_socket);
  ArbitratedMachine arbitrated;
  Ticker ticker("ticker");
  DramController dram("dram", dram_config());
  Saturator saturator("saturator");
  saturator.socket.bind(dram.target_socket);
  sc_core::sc_start(sc_core::SC_ZERO_TIME);

  const auto add = [](const char* name, auto body) {
    benchmark::RegisterBenchmark(name, body)->Repetitions(7)->ReportAggregatesOnly(true);
  };
  add("read_plain_memory", [&](benchmark::State& state) {
    std::uint64_t i = 0;
    for (auto _ : state) direct.access(tlm::TLM_READ_COMMAND, (i += 4) & 0xfff);
  });
  add("read_hit", [&](benchmark::State& state) {
    std::uint64_t i = 0;
    for (auto _ : state) two.initiators[0]->access(tlm::TLM_READ_COMMAND, (i += 4) & 0xfff);
  });
  add("bus_read", [&](benchmark::State& state) {  // 1 MiB through a cache of 16 KiB: every access misses
    std::uint64_t i = 0;
    for (auto _ : state) one.access(0, tlm::TLM_READ_COMMAND, (i += 32) % 0x100000);
  });
  add("bus_update", [&](benchmark::State& state) {
    std::size_t who = 0;  // both write the same word in turn: each write is an update of the other's copy
    for (auto _ : state) two.access(who ^= 1, tlm::TLM_WRITE_COMMAND, 0x40);
  });
  const auto private_data = [](Machine& machine) {
    return [&machine](benchmark::State& state) {
      std::uint64_t i = 0;
      const std::size_t count = machine.initiators.size();
      for (auto _ : state) {
        const std::size_t who = i % count;
        const std::uint64_t step = i++ / count;  // 2 KiB of its own through a cache of 1 KiB, four accesses a line
        machine.access(who, step % 3 == 0 ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND,
                       who * 0x10000 + step * 8 % 2048);
      }
    };
  };
  add("private_2_caches", private_data(few));
  add("private_64_caches", private_data(many));

  constexpr std::uint64_t batch = 2000;
  add("four_phases", [&](benchmark::State& state) {
    for (auto _ : state) bare_initiator.run(batch);
  });
  add("four_phases_waiting", [&](benchmark::State& state) {
    for (auto _ : state) waiting_initiator.run(batch);
  });
  add("arbitrated_miss", [&](benchmark::State& state) {
    for (auto _ : state) arbitrated.walker.run(batch);
  });
  add("timed_event", [&](benchmark::State& state) {
    for (auto _ : state) ticker.run(batch);
  });
  add("dram_random_rows", [&](benchmark::State& state) {
    for (auto _ : state) saturator.run(batch);
  });

  benchmark::Initialize(&argc, argv);
  Ratios ratios;
  benchmark::RunSpecifiedBenchmarks(&ratios);
  std::printf("\nRatios of this run\n");
  ratios.print("read hit / read of a plain memory on a simple socket", "read_hit", "read_plain_memory", 1.5);
  ratios.print("bus transaction (miss in memory) / read hit", "bus_read", "read_hit", 25);
  ratios.print("bus transaction (update of another copy) / read hit", "bus_update", "read_hit", 25);
  ratios.print("arbitrated miss / bare four phases, queues read by processes", "arbitrated_miss", "four_phases_waiting",
               1.5);
  ratios.print("DRAM request, random rows, saturated / timed event", "dram_random_rows", "timed_event", 12);
  std::printf("  %-64s %5.2f  (for comparison)\n", "arbitrated miss / bare four phases, queues that call back",
              ratios.times.at("arbitrated_miss") / ratios.times.at("four_phases"));
  ratios.print("an access to private data, 64 caches / 2 caches", "private_64_caches", "private_2_caches", 1.3);
  return 0;
}
