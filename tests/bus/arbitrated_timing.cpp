// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What a transaction costs in arbitrated timing, to the picosecond, worked out here from the configuration
// alone; the same in annotated timing when nothing competes. Unless a case says otherwise: clock 5 ns,
// arbitration 1, address 1, snoop 1, supply 2 cycles, 8 bytes a beat, lines of 32 bytes, hit 1 ns, memory 60
// ns.
#include <catch2/catch.hpp>
#include <random>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

// The parts of what cache `i` has done since the last call, as "hit 1000 wait-for-grant 9000": those that are
// not 0.
class PartsOf {
 public:
  explicit PartsOf(const CoherentCache& cache) : cache_(cache) {}
  std::string now() {
    const LatencyParts parts = cache_.totals().parts;
    std::string text;
    for (int i = 0; i < latency_parts; ++i) {
      const auto part = static_cast<LatencyPart>(i);
      if (parts[part] == before_[part]) continue;
      text += (text.empty() ? "" : " ") + std::string(name_of(part)) + " " +
              std::to_string(parts[part] - before_[part]);
    }
    before_ = parts;
    return text;
  }

 private:
  const CoherentCache& cache_;
  LatencyParts before_;
};

// Latency of one blocking access.
Picoseconds took(const std::function<void()>& access) {
  const Picoseconds start = now_ps();
  access();
  return now_ps() - start;
}

BenchOptions on(BusStructure structure, int caches = 2) {
  BenchOptions options;
  options.caches = caches;
  options.bus.structure = structure;
  return options;
}

void check_costs(BusStructure structure) {
  Bench bench(load_table("dirty-owner-update"), on(structure));
  PartsOf parts(bench.cache(0)), other_parts(bench.cache(1));
  simulate([&] {
    // Lookup 1; 4 to the edge and 5 of arbitration; address 5; snoop 5; memory 60; four beats of 5.
    CHECK(took([&] { bench.cpu(0).read(0x40); }) == ps(100));
    CHECK(parts.now() == "hit 1000 wait-for-grant 9000 snoop 5000 memory-array 60000 transfer 25000");
    CHECK(took([&] { bench.cpu(0).read(0x44); }) == ps(1));
    CHECK(parts.now() == "hit 1000");
    settle();
    // An update moves its word in one beat.
    CHECK(took([&] { bench.cpu(0).write(0x40, 1); }) == ps(1 + 9 + 5 + 5 + 5));
    CHECK(parts.now() == "hit 1000 wait-for-grant 9000 snoop 5000 transfer 10000");
    settle();
    // The owner's two cycles replace the memory's time.
    CHECK(took([&] { bench.cpu(1).read(0x40); }) == ps(1 + 9 + 5 + 5 + 10 + 20));
    CHECK(other_parts.now() == "hit 1000 wait-for-grant 9000 snoop 5000 owner-supply 10000 transfer 25000");
    settle();
    // A write miss is a fetch and an update, whose request begins on an edge and pays its own arbitration.
    CHECK(took([&] { bench.cpu(0).write(0x80, 1); }) == ps(100 + 5 + 5 + 5 + 5));
    CHECK(parts.now() == "hit 1000 wait-for-grant 14000 snoop 10000 memory-array 60000 transfer 35000");
    settle();
    CHECK(bench.broken_laws() == "");
  });
}

void check_write_through_and_upgrade(BusStructure structure) {
  BoxedBench through("through", load_table("write-through-update"), on(structure));
  BoxedBench upgrade("upgrade", load_table("msi"), on(structure));
  PartsOf through_parts(through.bench.cache(0)), upgrade_parts(upgrade.bench.cache(0));
  simulate([&] {
    through.bench.cpu(0).read(0x40);
    upgrade.bench.cpu(0).read(0x40);
    through_parts.now();
    upgrade_parts.now();
    settle();
    CHECK(took([&] { through.bench.cpu(0).write(0x40, 1); }) == ps(1 + 9 + 5 + 5 + 5 + 60));
    CHECK(through_parts.now() == "hit 1000 wait-for-grant 9000 snoop 5000 memory-array 60000 transfer 10000");
    settle();
    CHECK(took([&] { upgrade.bench.cpu(0).write(0x40, 1); }) == ps(1 + 9 + 5 + 5));
    CHECK(upgrade_parts.now() == "hit 1000 wait-for-grant 9000 snoop 5000 transfer 5000");
    CHECK(took([&] { upgrade.bench.cpu(0).write(0x40, 2); }) == ps(1));
  });
}

}  // namespace

TEST_CASE("arbitrated, split: a miss, an update, an owner's supply and a write miss cost their cycles",
          "[bus]") {
  check_costs(BusStructure::split);
}
TEST_CASE("arbitrated, connected: a miss, an update, an owner's supply and a write miss cost their cycles",
          "[bus]") {
  check_costs(BusStructure::connected);
}
TEST_CASE("arbitrated, split: a write-through waits for memory, an upgrade moves nothing", "[bus]") {
  check_write_through_and_upgrade(BusStructure::split);
}
TEST_CASE("arbitrated, connected: a write-through waits for memory, an upgrade moves nothing", "[bus]") {
  check_write_through_and_upgrade(BusStructure::connected);
}

TEST_CASE("arbitrated: a victim's write-back does not delay the fetch it makes room for", "[bus]") {
  BenchOptions options;
  options.geometry = {32, 1, 32, Replacement::lru, 1};
  Bench bench(load_table("dirty-owner-update"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 1);
    settle();
    const Picoseconds start = now_ps();
    CHECK(took([&] { bench.cpu(0).read(0x80); }) == ps(100));
    settle();
    // Granted behind the fetch at 15, address until 20, four beats until 40: then memory gets the line.
    CHECK(bench.memory.requests.back().write);
    CHECK(bench.memory.requests.back().at == start + ps(40));
    const BusKindTotals totals = bench.bus->totals().kind[static_cast<std::size_t>(BusKind::write_back)];
    CHECK(totals.count == 1);
    CHECK(totals.time == ps(99));  // from its request at 1 to memory's answer at 100
    CHECK(totals.wait == ps(14));
    CHECK(bench.memory.word(0x40) == 1);
  });
}

TEST_CASE("arbitrated: an uncached access costs the same as in annotated timing, part by part", "[bus]") {
  // The parts of an uncached access are nobody's; its transaction's time and wait are.
  BenchOptions options;
  Bench bench(load_table("dirty-owner-update"), options);
  simulate([&] {
    const std::uint64_t device = Bench::device_base;
    CHECK(took([&] { bench.cpu(0).write(device, 7); }) ==
          ps(5 + 5 + 5 + 60));  // edge, arbitration, address, beat, device
    settle();
    CHECK(took([&] { CHECK(bench.cpu(0).read(device) == 7); }) == ps(5 + 5 + 60 + 5));
    const SnoopingBusTotals totals = bench.bus->totals();
    CHECK(totals.kind[static_cast<std::size_t>(BusKind::io_read)].time == ps(75));
    CHECK(totals.kind[static_cast<std::size_t>(BusKind::io_write)].time == ps(75));
    CHECK(totals.kind[static_cast<std::size_t>(BusKind::io_read)].wait == ps(5));
  });
}

TEST_CASE("arbitrated: cycles of 0 cost nothing and odd hit times wait for the clock's edge", "[bus]") {
  BenchOptions options;
  options.bus.clock = ns(3);
  options.bus.width_bytes = 16;
  options.bus.arbitration_cycles = 0;
  options.bus.snoop_cycles = 0;
  options.bus.supply_cycles = 0;
  options.cache.hit_time = sc_core::sc_time(1700, sc_core::SC_PS);
  Bench bench(load_table("dirty-owner-update"), options);
  bench.memory.latency = sc_core::sc_time(10001, sc_core::SC_PS);
  PartsOf parts(bench.cache(0)), other_parts(bench.cache(1));
  simulate([&] {
    // Lookup until 1.7, edge 3, address until 6, memory until 16.001, edge 18, two beats until 24.
    CHECK(took([&] { bench.cpu(0).read(0x40); }) == ps(24));
    CHECK(parts.now() == "hit 1700 wait-for-grant 3299 memory-array 10001 transfer 9000");
    settle(ns(3));
    bench.cpu(0).write(0x40, 1);
    settle(ns(3));
    CHECK(took([&] { bench.cpu(1).read(0x40); }) == ps(3 + 3 + 6));
    CHECK(other_parts.now() == "hit 1700 wait-for-grant 1300 transfer 9000");
    settle(ns(3));
    // Begun just past an edge: the next one counts.
    sc_core::wait(sc_core::sc_time(1301, sc_core::SC_PS));
    CHECK(took([&] { bench.cpu(0).read(0x80); }) == 24000 + 3000 - 1301);
  });
}

TEST_CASE("arbitrated: after every transfer nobody drives the data bus for the turnaround", "[bus]") {
  BenchOptions options = on(BusStructure::split, 3);
  options.bus.turnaround_cycles = 2;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    std::array<Picoseconds, 3> latency{};
    std::vector<std::function<void()>> reads;
    for (int i = 0; i < 3; ++i)
      reads.push_back([&, i] {
        latency[static_cast<std::size_t>(i)] =
            took([&] { bench.cpu(i).read(0x100 * (static_cast<unsigned>(i) + 1)); });
      });
    at_once(reads);
    // Grants at 10, 15, 20; data there at 80, 85, 90. Four beats and two idle cycles each.
    CHECK(latency == std::array<Picoseconds, 3>{ps(100), ps(130), ps(160)});
    CHECK(bench.bus->totals().data_busy == 3 * ps(30));
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("arbitrated, connected: the next grant comes after the last beat and its turnaround", "[bus]") {
  BenchOptions options = on(BusStructure::connected);
  options.bus.turnaround_cycles = 3;
  Bench bench(load_table("msi"), options);
  PartsOf parts(bench.cache(1));
  simulate([&] {
    Picoseconds latency = 0;
    at_once({[&] { bench.cpu(0).read(0x100); }, [&] { latency = took([&] { bench.cpu(1).read(0x200); }); }});
    // The first holds the bus from 10 to 100, turnaround until 115.
    CHECK(latency == ps(115 + 5 + 5 + 60 + 20));
    CHECK(parts.now() == "hit 1000 wait-for-grant 114000 snoop 5000 memory-array 60000 transfer 25000");
    CHECK(bench.bus->totals().address_busy == 2 * ps(105));
  });
}

TEST_CASE("arbitrated, connected: a write-through leaves the bus while memory takes its word", "[bus]") {
  Bench bench(load_table("write-through-update"), on(BusStructure::connected));
  simulate([&] {
    bench.cpu(0).read(0x40);
    settle();
    Picoseconds latency = 0;
    at_once(
        {[&] { bench.cpu(0).write(0x40, 1); }, [&] { latency = took([&] { bench.cpu(1).read(0x200); }); }});
    CHECK(latency == ps(25 + 5 + 5 + 60 + 20));  // the word's beat ends at 25, the write-through itself at 85
  });
}

TEST_CASE("arbitrated: the data bus serves whoever has data first, not whoever was granted first", "[bus]") {
  Bench bench(load_table("dirty-owner-update"));
  simulate([&] {
    bench.cpu(0).write(0x40, 1);  // so that a supply is quick
    settle();
    Picoseconds slow = 0, quick = 0;
    at_once({[&] { slow = took([&] { bench.cpu(0).read(0x200); }); },
             [&] { quick = took([&] { bench.cpu(1).read(0x40); }); }});
    CHECK(slow == ps(100));                    // granted at 10, data at 80
    CHECK(quick == ps(15 + 5 + 5 + 10 + 20));  // granted at 15, data at 35
  });
}

TEST_CASE("arbitrated: data known of later but ready earlier goes first, unless the other transfer has begun",
          "[bus]") {
  Bench bench(load_table("msi"), on(BusStructure::split, 3));
  simulate([&] {
    // When memory answers early, the bus knows long before when it will have data.
    bench.memory.latency = ns(200);
    std::array<Picoseconds, 3> latency{};
    at_once(
        {[&] { latency[0] = took([&] { bench.cpu(0).read(0x100); }); },  // granted at 10, data at 220, 240
         [&] {
           sc_core::wait(ns(100));
           bench.memory.latency = ns(92);
           latency[1] = took(
               [&] { bench.cpu(1).read(0x200); });  // granted at 110, data at 212, goes first, 215 to 235
         },
         [&] {
           sc_core::wait(ns(185));
           bench.memory.latency = ns(7);
           latency[2] =
               took([&] { bench.cpu(2).read(0x300); });  // granted at 195, data at 212 too: behind it
         }});
    CHECK(latency[1] == ps(235 - 100));
    CHECK(latency[2] == ps(255 - 185));
    CHECK(latency[0] == ps(275));
    CHECK(bench.broken_laws() == "");
    settle();
    const Picoseconds start = now_ps();
    bench.memory.latency = ns(100);
    at_once({[&] { latency[0] = took([&] { bench.cpu(0).read(0x400); }); },  // data at 120, moves until 140
             [&] {
               sc_core::wait(ns(105));
               bench.memory.latency = ns(0);
               latency[1] =
                   took([&] { bench.cpu(1).read(0x500); });  // granted at 115, data at 125: waits until 140
             }});
    CHECK(now_ps() - start == ps(160));
    CHECK(latency[0] == ps(140));
    CHECK(latency[1] == ps(160 - 105));
  });
}

TEST_CASE("arbitrated: no more transactions are under way than the limit", "[bus]") {
  BenchOptions options = on(BusStructure::split, 4);
  options.bus.outstanding = 2;
  Bench bench(load_table("msi"), options);
  bench.memory.latency = ns(200);
  simulate([&] {
    std::array<Picoseconds, 4> latency{};
    std::vector<std::function<void()>> reads;
    for (int i = 0; i < 4; ++i)
      reads.push_back([&, i] {
        latency[static_cast<std::size_t>(i)] =
            took([&] { bench.cpu(i).read(0x100 * (static_cast<unsigned>(i) + 1)); });
      });
    at_once(reads);
    // Data at 220 and 225; the first ends at 240: only then is the third granted.
    CHECK(latency ==
          std::array<Picoseconds, 4>{ps(240), ps(260), ps(240 + 10 + 200 + 20), ps(260 + 10 + 200 + 20)});
    for (const BusQueue& queue : bench.bus->queues())
      if (queue.name == "outstanding transactions") CHECK(queue.meter->most() == 2);
  });
}

TEST_CASE("arbitrated: a cache fetches as many lines at once as it has misses, the next one waits", "[bus]") {
  BenchOptions options = on(BusStructure::split, 1);
  options.cache.misses = 2;
  options.geometry = {1024, 8, 32, Replacement::lru, 1};
  Bench bench(load_table("msi"), options);
  PartsOf parts(bench.cache(0));
  simulate([&] {
    std::array<Picoseconds, 3> latency{};
    std::vector<std::function<void()>> reads;
    for (unsigned i = 0; i < 3; ++i)
      reads.push_back([&, i] {
        sc_core::wait(i, sc_core::SC_PS);
        latency[i] = took([&] { bench.cpu(0).read(0x100 * (i + 1)); });
      });
    at_once(reads);
    // The third asks when the first is done, on an edge: 5 of arbitration, 90 more.
    CHECK(latency == std::array<Picoseconds, 3>{ps(100), ps(120) - 1, ps(100 + 5 + 10 + 60 + 20) - 2});
    CHECK(bench.cache(0).miss_queue()->most() == 2);
    CHECK(bench.cache(0).access_queue()->arrivals() == 1);
    CHECK(bench.broken_laws() == "");
  });
}

// ---- Annotated and arbitrated timing agree whenever nothing competes

namespace {

struct Both {
  struct Box : sc_core::sc_module {
    Box(sc_core::sc_module_name name, const Table& table, const SystemOptions& options, BusTiming timing)
        : sc_module(name), system(table, with(options, timing)) {}
    static SystemOptions with(SystemOptions options, BusTiming timing) {
      options.bus.timing = timing;
      return options;
    }
    System system;
  };
  Both(const Table& table, const SystemOptions& options)
      : first("annotated", table, options, BusTiming::annotated),
        second("arbitrated", table, options, BusTiming::arbitrated) {}
  Box first, second;
  System& annotated = first.system;
  System& arbitrated = second.system;
};

std::string text_of(const CacheTotals& totals, bool times) {
  std::ostringstream text;
  text << totals.reads << " reads " << totals.writes << " writes " << totals.hits << " hits " << totals.misses
       << " misses " << totals.uncached << " uncached " << totals.errors << " errors, kinds";
  for (const Histogram& kind : totals.kind) {
    text << ' ' << kind.count();
    if (times) text << " in " << kind.sum();
  }
  for (int i = 0; i < latency_parts && times; ++i)
    text << ", " << name_of(static_cast<LatencyPart>(i)) << ' ' << totals.parts[static_cast<LatencyPart>(i)];
  return text.str();
}

std::string text_of(const SnoopingBusTotals& totals, bool times) {
  std::ostringstream text;
  for (const BusKindTotals& kind : totals.kind) {
    text << kind.count << " of " << kind.address_cycles << '+' << kind.data_cycles << " cycles";
    if (times) text << " in " << kind.time << " wait " << kind.wait;
    text << ", ";
  }
  text << "supplied " << totals.supplied_by_owner << ' ' << totals.supplied_by_sharer << ' '
       << totals.supplied_by_memory << ", blocks " << totals.block_reads << ' ' << totals.block_writes
       << ", words " << totals.word_writes << ", data " << totals.data_busy;
  if (times) text << " address " << totals.address_busy;
  return text.str();
}

// Random accesses, the next when everything has ended. `idle`: no access needs a place that another line has,
// none crosses lines, so that nothing ever competes: then times agree too; else values, states and counts.
void check_agreement(BusStructure structure, unsigned seed, bool idle) {
  std::mt19937 random(seed);
  const auto draw = [&](std::uint64_t below) { return static_cast<unsigned>(random() % below); };
  const std::string protocol = builtin_tables()[seed % builtin_tables().size()];
  SystemOptions options;
  options.caches = 3;
  options.geometry = {idle ? 32u * 16 : 32u * 4, 2, 32, static_cast<Replacement>(draw(3)), 1};
  options.windows = {{"memory", 0, 0x1000, true, 0}, {"device", 0x1000, 0x1000, false, 0}};
  options.bus.structure = structure;
  options.bus.clock = ns(seed % 2 == 0 ? 5 : 3);
  options.bus.arbitration_cycles = draw(3);
  options.bus.snoop_cycles = draw(3);
  options.bus.supply_cycles = draw(3);
  options.bus.turnaround_cycles = draw(3);
  options.bus.width_bytes = 1u << draw(7);
  options.cache.hit_time = sc_core::sc_time(700 + draw(3) * 650, sc_core::SC_PS);
  Both both(load_table(protocol), options);
  simulate([&] {
    for (unsigned n = 0; n < 2000; ++n) {
      const int who = static_cast<int>(draw(3));
      const bool device = draw(8) == 0;
      const unsigned length = idle ? 1 + draw(4) : 1 + draw(48);
      const std::uint64_t address = device ? 0x1000 + draw(32) * 4 : draw(32 * 8) / 4 * 4;
      const auto command = draw(2) == 0 ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND;
      std::array<std::uint8_t, 48> a{};
      for (auto& byte : a) byte = static_cast<std::uint8_t>(random());
      std::array<std::uint8_t, 48> b = a;
      INFO(protocol << ", access " << n << ": " << (command == tlm::TLM_WRITE_COMMAND ? "write " : "read ")
                    << length << " at " << address << " by " << who);
      if (draw(8) == 0) {
        const std::uint64_t line = draw(8) * 32;
        REQUIRE(both.annotated.cache(who).replace(line, sc_core::SC_ZERO_TIME) == tlm::TLM_OK_RESPONSE);
        REQUIRE(both.arbitrated.cache(who).replace(line, sc_core::SC_ZERO_TIME) == tlm::TLM_OK_RESPONSE);
        sc_core::wait(ns(2000));
      }
      if (idle && protocol == "firefly") {
        // The write-through of a write miss would wait until memory has the line that a dirty owner has
        // supplied.
        both.annotated.cpu(who).read(address / 4 * 4);
        both.arbitrated.cpu(who).read(address / 4 * 4);
        sc_core::wait(ns(2000));
      }
      REQUIRE(both.annotated.cpu(who).transport(command, address, a.data(), length) == tlm::TLM_OK_RESPONSE);
      const Picoseconds start = now_ps();
      REQUIRE(both.arbitrated.cpu(who).transport(command, address, b.data(), length) == tlm::TLM_OK_RESPONSE);
      if (idle) REQUIRE(now_ps() - start == to_ps(both.annotated.cpu(who).delay));
      REQUIRE(a == b);
      REQUIRE(text_of(both.annotated.cache(who).totals(), idle) ==
              text_of(both.arbitrated.cache(who).totals(), idle));
      sc_core::wait(sc_core::sc_time(2000000 + draw(7000), sc_core::SC_PS));
      for (std::uint64_t line = 0; line < 32 * 10; line += 32)
        REQUIRE(both.annotated.states(line) == both.arbitrated.states(line));
      REQUIRE(text_of(both.annotated.bus->totals(), idle) == text_of(both.arbitrated.bus->totals(), idle));
    }
    for (const auto& cache : both.arbitrated.caches) CHECK(cache->broken_laws().empty());
    CHECK(both.arbitrated.bus->broken_laws().empty());
  });
}

}  // namespace

// The number decides the protocol, its last digit, and everything else.
#define EARSHOT_AGREE(number)                                                                                \
  TEST_CASE("idle, split: both timings agree to the picosecond in every part, seed " #number, "[bus]") {     \
    check_agreement(BusStructure::split, number, true);                                                      \
  }                                                                                                          \
  TEST_CASE("idle, connected: both timings agree to the picosecond in every part, seed " #number, "[bus]") { \
    check_agreement(BusStructure::connected, number, true);                                                  \
  }                                                                                                          \
  TEST_CASE("both timings agree in values, states and counts, split, seed " #number, "[bus]") {              \
    check_agreement(BusStructure::split, number, false);                                                     \
  }                                                                                                          \
  TEST_CASE("both timings agree in values, states and counts, connected, seed " #number, "[bus]") {          \
    check_agreement(BusStructure::connected, number, false);                                                 \
  }
EARSHOT_AGREE(0)
EARSHOT_AGREE(1)
EARSHOT_AGREE(2)
EARSHOT_AGREE(3)
EARSHOT_AGREE(4)
EARSHOT_AGREE(5)
EARSHOT_AGREE(6)
EARSHOT_AGREE(7)
EARSHOT_AGREE(8)
EARSHOT_AGREE(9)
#undef EARSHOT_AGREE
