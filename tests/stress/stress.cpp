// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Seeded stress of arbitrated timing, monitor on: every protocol, bus structure, arbiter, manner of access and kind of
// memory in turn, over caches so small that replacement, write-back and refill of one line collide all the time.
//
//   stress --accesses N [--seed S] [--runs R]     R runs from seed S on, each of N accesses, each in a process of its own
//
// A run's seed decides everything about it; a failure prints it and the command that repeats it. What is checked: the
// monitor on every access; the rules of the base protocol on every hop, from an initiator to its cache and from the bus
// to a target; that the values an initiator receives from a word with one writer never go back; that
// everything ends; Little's law and the other self-checks; memory after a flush.
#define SC_INCLUDE_DYNAMIC_PROCESSES
#include <sys/wait.h>
#include <unistd.h>

#include <array>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <deque>
#include <memory>
#include <random>
#include <string>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_initiator_socket.h>
#include <vector>

#include "earshot/bus/io_port.h"
#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/observe/coherence_monitor.h"
#include "earshot/timing/agenda.h"
#include "stress_memory.h"
#include "tlm/base_protocol_observer.h"

namespace earshot::test {
namespace {

using Random = std::mt19937_64;

constexpr std::uint64_t uncached_base = 0x100000;
constexpr unsigned outstanding = 6;

// What one seed stands for: the low digits enumerate the combinations, so that consecutive seeds visit all of them.
struct Plan {
  explicit Plan(std::uint64_t number) : seed(number), random(number * 0x9E3779B97F4A7C15u + 1) {
    const auto digit = [&](std::uint64_t base) {
      const std::uint64_t value = number % base;
      number /= base;
      return value;
    };
    protocol = builtin_tables()[digit(builtin_tables().size())];
    structure = digit(2) == 0 ? BusStructure::split : BusStructure::connected;
    non_blocking = digit(2) != 0;
    arbitration = static_cast<Arbitration>(digit(6));
    memory = static_cast<StressMemory::Kind>(digit(StressMemory::kinds));
    caches = 2 + static_cast<int>(random() % 7);
    ways = 1u << random() % 3;
    sets = 1u << random() % 2;
    lines = ways * sets + 1 + static_cast<unsigned>(random() % 5);
    misses = 1 + static_cast<unsigned>(random() % 4);
    write_back_slots = 1 + static_cast<unsigned>(random() % 2);
    replacement = static_cast<Replacement>(random() % 4);
    devices = static_cast<int>(random() % 3);
  }
  std::string text() const {
    return protocol + (structure == BusStructure::split ? ", split" : ", connected") +
           (non_blocking ? ", nb_transport" : ", b_transport") + ", arbiter " +
           std::to_string(static_cast<int>(arbitration)) + ", memory " + std::to_string(static_cast<int>(memory)) +
           ", " + std::to_string(caches) + " caches of " + std::to_string(sets) + " x " + std::to_string(ways) +
           " lines, " + std::to_string(devices) + " I/O ports";
  }
  std::uint64_t seed;
  Random random;
  std::string protocol;
  BusStructure structure;
  bool non_blocking;
  Arbitration arbitration;
  StressMemory::Kind memory;
  int caches;
  unsigned ways, sets, lines, misses, write_back_slots;
  Replacement replacement;
  int devices;
};

[[noreturn]] void fail(const std::string& text) { throw std::runtime_error(text); }

// One access of an initiator, and the payload it travels in.
struct Step : tlm::tlm_generic_payload {
  explicit Step(tlm::tlm_mm_interface* owner) : tlm_generic_payload(owner) {}
  std::array<std::uint8_t, 64> bytes{};
  std::array<std::uint8_t, 16> enables{};
};

// Draws accesses. Word w of every line is written by initiator w modulo the number of initiators only, with rising
// values, except the upper half of the line, which everybody writes. `cache` is null before an I/O port.
class Initiator : public sc_core::sc_module, private tlm::tlm_mm_interface {
 public:
  tlm_utils::simple_initiator_socket<Initiator> socket{"socket"};

  Initiator(sc_core::sc_module_name name, Plan& plan, int number, std::uint64_t accesses, CoherentCache* cache)
      : sc_module(name), plan_(plan), number_(number), left_(accesses), random_(plan.random()), cache_(cache) {
    socket.register_nb_transport_bw(this, &Initiator::backward);
    SC_HAS_PROCESS(Initiator);
    if (plan.non_blocking) {
      SC_METHOD(work);
      sensitive << agenda_.due();
      dont_initialize();
    } else {
      SC_THREAD(play);
    }
  }
  void start_of_simulation() override {
    if (plan_.non_blocking) agenda_.at<&Initiator::issue>(random_() % 20000, this, this);
  }
  bool finished() const { return left_ == 0 && in_flight_ == 0; }
  std::uint64_t done() const { return done_; }

 private:
  void free(tlm::tlm_generic_payload* payload) override {
    payload->reset();
    unused_.push_back(static_cast<Step*>(payload));
  }

  void draw(Step& step) {
    const std::uint64_t line = random_() % plan_.lines * 32;
    unsigned length = 4;
    unsigned offset = static_cast<unsigned>(random_() % 8 * 4);
    const bool write = random_() % 2 == 0;
    if (write && offset < 16) offset = static_cast<unsigned>(number_ % 4 * 4);
    const bool mine = !write || offset >= 16 || (number_ < 4 && cache_ != nullptr);
    if (!mine) offset += 16;
    const unsigned odd = static_cast<unsigned>(random_() % 32);
    if (write && offset >= 16) {
      if (odd == 0) length = 16 - (offset - 16);             // to the end of the line
      if (odd == 1) offset = 16 + static_cast<unsigned>(random_() % 16), length = 1;
    } else if (!write) {
      if (odd < 2) length = 48;                              // over two or three lines
    }
    step.set_command(write ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND);
    step.set_address(line + offset);
    step.set_data_ptr(step.bytes.data());
    step.set_data_length(length);
    step.set_streaming_width(length);
    step.set_byte_enable_ptr(nullptr);
    step.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    step.set_dmi_allowed(false);
    if (odd == 3 && write && offset >= 16) {
      for (auto& enable : step.enables) enable = random_() % 2 == 0 ? TLM_BYTE_ENABLED : TLM_BYTE_DISABLED;
      step.set_byte_enable_ptr(step.enables.data());
      step.set_byte_enable_length(length);
    }
    if (odd == 4) step.set_address(uncached_base + static_cast<std::uint64_t>(number_) * 64 + random_() % 8 * 4);
    const std::uint32_t value = ++written_;
    for (unsigned i = 0; i < length; i += 4) std::memcpy(&step.bytes[i], &value, std::min(4u, length - i));
  }

  // Words with one writer never go back.
  void check(const Step& step) {
    if (!step.is_response_ok()) fail("access refused: " + step.get_response_string());
    ++done_;
    if (step.is_write() || step.get_address() >= uncached_base) return;
    // An access over several lines may be answered after a later one to its first line: not a step back.
    if (plan_.non_blocking && step.get_data_length() > 4) return;
    for (unsigned at = 0; at + 4 <= step.get_data_length(); at += 4) {
      const std::uint64_t address = step.get_address() + at;
      if (address % 32 >= 16 || address / 4 >= seen_.size()) continue;
      std::uint32_t value = 0;
      std::memcpy(&value, &step.bytes[at], 4);
      if (value < seen_[address / 4])
        fail("initiator " + std::to_string(number_) + " read " + std::to_string(value) + " at " +
             std::to_string(address) + " after " + std::to_string(seen_[address / 4]));
      seen_[address / 4] = value;
    }
  }

  void aside() {  // now and then something that is not an access
    if (random_() % 64 != 0) return;
    std::uint32_t word = 0;
    tlm::tlm_generic_payload debug;
    debug.set_address(random_() % plan_.lines * 32 + 16 + random_() % 4 * 4);
    debug.set_data_ptr(reinterpret_cast<std::uint8_t*>(&word));
    debug.set_data_length(4);
    debug.set_streaming_width(4);
    debug.set_command(random_() % 4 == 0 ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND);
    word = static_cast<std::uint32_t>(random_());
    if (socket->transport_dbg(debug) != 4) fail("debug access refused");
  }

  // b_transport
  void play() {
    Step step(this);
    for (; left_ > 0; --left_) {
      wait(from_ps(random_() % 8 == 0 ? random_() % 200000 : random_() % 3000));
      aside();
      if (cache_ != nullptr && random_() % 32 == 0) cache_->replace(random_() % plan_.lines * 32, sc_core::SC_ZERO_TIME);
      draw(step);
      sc_core::sc_time delay = from_ps(random_() % 3 * 1000);
      socket->b_transport(step, delay);
      check(step);
    }
  }

  // nb_transport, several outstanding
  void work() { agenda_.run(); }
  void issue(Initiator*) {
    if (left_ == 0 || requesting_ != nullptr || in_flight_ == outstanding) return;
    aside();
    --left_;
    ++in_flight_;
    if (unused_.empty()) {
      steps_.push_back(std::make_unique<Step>(static_cast<tlm::tlm_mm_interface*>(this)));
      unused_.push_back(steps_.back().get());
    }
    Step& step = *unused_.back();
    unused_.pop_back();
    step.acquire();
    draw(step);
    requesting_ = &step;
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    sc_core::sc_time time = from_ps(random_() % 4 == 0 ? random_() % 5000 : 0);
    switch (socket->nb_transport_fw(step, phase, time)) {
      case tlm::TLM_COMPLETED: fail("completed early");
      case tlm::TLM_UPDATED:
        if (phase == tlm::END_REQ) request_ended();
        break;
      case tlm::TLM_ACCEPTED: break;
    }
  }
  void request_ended() {
    requesting_ = nullptr;
    agenda_.at<&Initiator::issue>(now_ps() + (random_() % 8 == 0 ? random_() % 100000 : random_() % 2000), this, this);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    Step& step = static_cast<Step&>(payload);
    if (phase == tlm::END_REQ) {
      if (requesting_ != &step) fail("END_REQ out of turn");
      request_ended();
      return tlm::TLM_ACCEPTED;
    }
    if (phase != tlm::BEGIN_RESP || responding_ != nullptr) fail("response phase out of turn");
    if (requesting_ == &step) request_ended();
    check(step);
    const std::uint64_t manner = random_() % 3;
    time = from_ps(random_() % 2 * 700);
    if (manner < 2 && time == sc_core::SC_ZERO_TIME) {
      response_ended(&step);
      phase = tlm::END_RESP;
      return manner == 0 ? tlm::TLM_COMPLETED : tlm::TLM_UPDATED;
    }
    time = sc_core::SC_ZERO_TIME;
    responding_ = &step;
    agenda_.at<&Initiator::end_response>(now_ps() + random_() % 3000, this, &step);
    return tlm::TLM_ACCEPTED;
  }
  void end_response(Step* step) {
    responding_ = nullptr;
    tlm::tlm_phase phase = tlm::END_RESP;
    sc_core::sc_time time;
    socket->nb_transport_fw(*step, phase, time);
    response_ended(step);
  }
  void response_ended(Step* step) {
    --in_flight_;
    step->release();
    agenda_.at<&Initiator::issue>(now_ps() + random_() % 2000, this, this);
  }

  Plan& plan_;
  int number_;
  std::uint64_t left_;
  Random random_;
  CoherentCache* cache_;
  std::uint32_t written_ = 0;
  std::uint64_t done_ = 0;
  std::array<std::uint32_t, 512> seen_{};
  Agenda agenda_;
  std::vector<std::unique_ptr<Step>> steps_;
  std::vector<Step*> unused_;
  Step* requesting_ = nullptr;
  Step* responding_ = nullptr;
  unsigned in_flight_ = 0;
};

// Lets the initiators work, flushes, and checks what must hold then.
void run(Plan plan, std::uint64_t accesses) {
  const Table table = load_table(plan.protocol);
  SnoopingBusConfig bus_config;
  bus_config.timing = BusTiming::arbitrated;
  bus_config.structure = plan.structure;
  bus_config.windows = {{"memory", 0, uncached_base, true, 0}, {"device", uncached_base, 0x10000, false, 0}};
  bus_config.arbiter.kind = plan.arbitration;
  bus_config.arbiter.slot_cycles = 3;
  bus_config.arbiter.seed = plan.seed;
  bus_config.outstanding = 1 + static_cast<unsigned>(plan.random() % 6);
  bus_config.arbitration_cycles = static_cast<unsigned>(plan.random() % 3);
  bus_config.turnaround_cycles = static_cast<unsigned>(plan.random() % 2);
  bus_config.snoop_cycles = static_cast<unsigned>(plan.random() % 2);
  bus_config.supply_cycles = static_cast<unsigned>(plan.random() % 3);
  SnoopingBus bus("bus", bus_config);
  StressMemory memory(plan.memory, plan.random());
  PlainMemory device("registers", {});
  std::vector<std::unique_ptr<BaseProtocolObserver<>>> hops;
  const auto watch = [&](const std::string& name, auto& from, auto& to) {
    hops.push_back(std::make_unique<BaseProtocolObserver<>>(("hop_of_" + name).c_str(), name));
    from.bind(hops.back()->target_socket);
    hops.back()->initiator_socket.bind(to);
  };
  watch("memory", bus.window_socket("memory"), memory.socket());
  watch("registers", bus.window_socket("device"), device.target_socket);

  CoherenceMonitor monitor(32, [&](std::uint64_t address, std::uint8_t* to, std::size_t length) {
    memory.peek(address, to, length);
  });
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Initiator>> initiators;
  const std::uint64_t share = accesses / static_cast<unsigned>(plan.caches + plan.devices);
  CacheConfig config;
  config.geometry = {std::uint64_t{32} * plan.ways * plan.sets, plan.ways, 32, plan.replacement, plan.seed};
  config.table = std::make_shared<const Table>(table);
  config.misses = plan.misses;
  config.write_back_slots = plan.write_back_slots;
  for (int i = 0; i < plan.caches; ++i) {
    const std::string name = "cache" + std::to_string(i);
    if (table.family() == Family::update)
      caches.push_back(std::make_unique<UpdatingCache>(name.c_str(), config));
    else
      caches.push_back(std::make_unique<InvalidatingCache>(name.c_str(), config));
    caches.back()->bus_socket.bind(bus.cache_socket);
    caches.back()->set_observer(&monitor);
    initiators.push_back(std::make_unique<Initiator>(("initiator" + std::to_string(i)).c_str(), plan, i,
                                                     share, caches.back().get()));
    watch("initiator" + std::to_string(i), initiators.back()->socket, caches.back()->cpu_socket);
  }
  std::vector<std::unique_ptr<IoPort>> ports;
  for (int i = 0; i < plan.devices; ++i) {
    const std::string number = std::to_string(i);
    ports.push_back(std::make_unique<IoPort>(("port" + number).c_str()));
    ports.back()->bus_socket.bind(bus.cache_socket);
    ports.back()->set_observer(&monitor);
    initiators.push_back(std::make_unique<Initiator>(("device" + number).c_str(), plan, plan.caches + i, share, nullptr));
    watch("device" + number, initiators.back()->socket, ports.back()->io_socket);
  }
  bool flushed = false;
  sc_core::sc_event flush;
  sc_core::sc_spawn(
      [&] {
        sc_core::wait(flush);
        for (const auto& cache : caches) {
          sc_core::sc_time delay;
          if (cache->flush(delay) != 0) fail("memory refused a line");
        }
        flushed = true;
      },
      "flusher");
  sc_core::sc_start();
  for (const auto& initiator : initiators)
    if (!initiator->finished()) fail("an initiator never finished:\n" + bus.waiting());
  if (!bus.waiting().empty()) fail("something is left waiting:\n" + bus.waiting());
  flush.notify();
  sc_core::sc_start();
  if (!flushed) fail("the flush never ended:\n" + bus.waiting());
  if (monitor.check_memory() != 0) fail("lines are still owned after the flush");
  for (const std::string& law : bus.broken_laws()) fail(law);
  for (const auto& cache : caches) {
    for (const std::string& law : cache->broken_laws()) fail(law);
    const CacheTotals totals = cache->totals();
    if (totals.parts.total() != totals.latency().sum()) fail("the parts of the latencies are not their sum");
  }
  for (const auto& hop : hops) {
    for (const BrokenRule& broken : hop->rules().broken()) fail(broken.text);
    if (hop->rules().in_flight() != 0) fail("a transaction over " + std::string(hop->name()) + " has not ended");
  }
  memory.check();
}

// In a process of its own. Returns what went wrong.
bool run_apart(std::uint64_t seed, std::uint64_t accesses) {
  std::fflush(nullptr);
  const pid_t child = fork();
  if (child != 0) {
    int status = 0;
    waitpid(child, &status, 0);
    return WIFEXITED(status) && WEXITSTATUS(status) == 0;
  }
  const Plan plan(seed);
  try {
    sc_core::sc_report_handler::set_actions("/OSCI/SystemC", sc_core::SC_INFO, sc_core::SC_DO_NOTHING);
    run(plan, accesses);
    _exit(0);
  } catch (const std::exception& error) {
    std::printf("seed %llu (%s) fails:\n  %s\n", static_cast<unsigned long long>(seed), plan.text().c_str(), error.what());
  }
  std::fflush(nullptr);
  _exit(1);
}

}  // namespace
}  // namespace earshot::test

int sc_main(int argc, char* argv[]) {
  using namespace earshot::test;
  std::uint64_t accesses = 0, seed = 0, runs = 1;
  for (int i = 1; i + 1 < argc; i += 2) {
    const std::string key = argv[i];
    const std::uint64_t value = std::strtoull(argv[i + 1], nullptr, 10);
    (key == "--accesses" ? accesses : key == "--seed" ? seed : runs) = value;
  }
  if (accesses == 0) {
    std::printf("usage: stress --accesses N [--seed S] [--runs R]\n");
    return 2;
  }
  std::uint64_t failed = 0;
  for (std::uint64_t i = 0; i < runs; ++i) {
    if (run_apart(seed + i, accesses)) continue;
    std::printf("  repeat with: stress --seed %llu --accesses %llu\n", static_cast<unsigned long long>(seed + i),
                static_cast<unsigned long long>(accesses));
    if (++failed == 10) break;
  }
  std::printf("stress: %llu runs of %llu accesses from seed %llu, %llu failed\n", static_cast<unsigned long long>(runs),
              static_cast<unsigned long long>(accesses), static_cast<unsigned long long>(seed),
              static_cast<unsigned long long>(failed));
  return failed == 0 ? 0 : 1;
}
