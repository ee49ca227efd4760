// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Races between caches in arbitrated timing: what was asked for is judged at its grant, a victim is snooped
// until its own, one transaction a line. Grants of an idle split bus: a request asked for at 1 ns is granted
// at 10, the next at 15.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

BenchOptions one_line_caches(int caches) {
  BenchOptions options;
  options.caches = caches;
  options.geometry = {32, 1, 32, Replacement::lru, 1};
  return options;
}

// Port `first` goes before all others.
void prefer(BenchOptions& options, int first) {
  options.bus.arbiter.kind = Arbitration::fixed_priority;
  options.bus.arbiter.priorities = {first};
  for (int port = 0; port < options.caches; ++port)
    if (port != first) options.bus.arbiter.priorities.push_back(port);
}

std::uint64_t supplied_by_owner(const Bench& bench) {
  return bench.bus->totals().supplied_by_owner;
}

}  // namespace

// ---- Judged at the grant

namespace {

// Both hold the line and write it at once: the second's copy is gone when its turn comes.
void check_lost_upgrade(const std::string& protocol, BusStructure structure) {
  BenchOptions options;
  options.bus.structure = structure;
  Bench bench(load_table(protocol), options);
  simulate([&] {
    bench.cpu(0).read(0x40);
    bench.cpu(1).read(0x40);
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 10); }, [&] { bench.cpu(1).write(0x44, 11); }});
    CHECK(bench.count(BusKind::upgrade) == 1);
    CHECK(bench.count(BusKind::read_exclusive) == 1);
    CHECK(supplied_by_owner(bench) == 1);
    CHECK(bench.memory.requests.size() <= 2);  // the two reads: the supply is not memory's
    CHECK(bench.cache(0).state_of(0x40) == bench.cache(0).table().state(absent).name);
    CHECK(bench.cpu(0).read(0x40) == 10);
    CHECK(bench.cpu(0).read(0x44) == 11);
    const auto& kinds = bench.cache(1).totals().kind;
    CHECK(kinds[static_cast<std::size_t>(AccessKind::upgrade)].count() == 0);
    CHECK(kinds[static_cast<std::size_t>(AccessKind::miss_from_owner)].count() == 1);
    CHECK(bench.broken_laws() == "");
  });
}

}  // namespace

TEST_CASE("an upgrade whose copy is lost before its grant becomes a read-exclusive: msi", "[cache]") {
  check_lost_upgrade("msi", BusStructure::split);
}
TEST_CASE("an upgrade whose copy is lost before its grant becomes a read-exclusive: mesi, connected",
          "[cache]") {
  check_lost_upgrade("mesi", BusStructure::connected);
}
TEST_CASE("an upgrade whose copy is lost before its grant becomes a read-exclusive: moesi", "[cache]") {
  check_lost_upgrade("moesi", BusStructure::split);
}
TEST_CASE("an upgrade whose copy is lost before its grant becomes a read-exclusive: berkeley", "[cache]") {
  check_lost_upgrade("berkeley", BusStructure::split);
}

TEST_CASE("an owner's upgrade that loses the line becomes a read-exclusive too", "[cache]") {
  BenchOptions options;
  prefer(options, 1);
  Bench bench(load_table("moesi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 1);
    bench.cpu(1).read(0x40);
    CHECK(bench.states(0x40) == "O S");
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 10); }, [&] { bench.cpu(1).write(0x44, 11); }});
    CHECK(bench.states(0x40) == "M I");
    CHECK(bench.count(BusKind::upgrade) == 1);
    CHECK(bench.count(BusKind::read_exclusive) == 2);  // the first write's, and the lost upgrade
    CHECK(bench.cpu(1).read(0x40) == 10);
    CHECK(bench.cpu(1).read(0x44) == 11);
  });
}

TEST_CASE("a write-through whose copy is lost before its grant turns into a read-exclusive, write-once",
          "[cache]") {
  Bench bench(load_table("write-once"));
  simulate([&] {
    bench.cpu(0).read(0x40);
    bench.cpu(1).read(0x40);
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 10); }, [&] { bench.cpu(1).write(0x44, 11); }});
    CHECK(bench.count(BusKind::write_through) == 1);
    CHECK(bench.count(BusKind::read_exclusive) == 1);
    CHECK(bench.states(0x40) == "I D");
    CHECK(bench.memory.word(0x40) == 10);
    CHECK(bench.memory.word(0x44) == 0);
    CHECK(bench.cpu(0).read(0x44) == 11);
  });
}

TEST_CASE("an update whose copy is lost before its grant fetches the line again and then updates",
          "[cache]") {
  Bench bench(load_table("competitive-update", 1));  // the first update received ends a copy
  simulate([&] {
    bench.cpu(0).read(0x40);
    bench.cpu(1).read(0x40);
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 10); }, [&] { bench.cpu(1).write(0x44, 11); }});
    // 0's update ends 1's copy; 1 fetches from the new owner, and its own update ends 0's copy.
    CHECK(bench.count(BusKind::read) == 3);
    CHECK(bench.count(BusKind::update) == 2);
    CHECK(bench.states(0x40) == "I M");
    CHECK(bench.cpu(0).read(0x40) == 10);
    CHECK(bench.cpu(0).read(0x44) == 11);
    CHECK(bench.cache(1).totals().kind[static_cast<std::size_t>(AccessKind::miss_from_owner)].count() == 1);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a write miss that finds itself alone needs no update after its fetch", "[cache]") {
  Bench bench(load_table("dragon"));
  simulate([&] {
    bench.cpu(0).write(0x40, 10);
    CHECK(bench.count(BusKind::read) == 1);
    CHECK(bench.count(BusKind::update) == 0);
    CHECK(bench.states(0x40) == "M I");
    // And one that was not alone when it asked, but is when it is granted.
    bench.cpu(1).read(0x40);
    settle();
    CHECK(bench.states(0x40) == "Sm Sc");
    at_once({[&] { bench.cpu(0).write(0x40, 11); },
             [&] {
               sc_core::wait(ns(2));
               bench.cache(1).replace(0x40, sc_core::SC_ZERO_TIME);
             }});
    CHECK(bench.count(BusKind::update) == 1);
    CHECK(bench.states(0x40) == "M I");
  });
}

TEST_CASE("of two updates at once the second takes ownership from the first", "[cache]") {
  Bench bench(load_table("dirty-owner-update"), {3});
  simulate([&] {
    for (int i = 0; i < 3; ++i) bench.cpu(i).read(0x40);
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 10); }, [&] { bench.cpu(1).write(0x40, 11); },
             [&] { bench.cpu(2).write(0x44, 12); }});
    CHECK(bench.count(BusKind::update) == 3);
    CHECK(bench.states(0x40) == "V V D");
    for (int i = 0; i < 3; ++i) {
      CHECK(bench.cpu(i).read(0x40) == 11);  // asked for after 10, granted after 10
      CHECK(bench.cpu(i).read(0x44) == 12);
    }
  });
}

namespace {

void write_together(Bench& bench) {
  for (std::uint32_t round = 1; round <= 20; ++round) {
    std::vector<std::function<void()>> writes;
    for (int i = 0; i < 4; ++i)
      writes.push_back([&bench, i, round] {
        sc_core::wait(ns(static_cast<double>(round * (static_cast<unsigned>(i) + 3) % 7 * 3)));
        bench.cpu(i).write(0x40 + static_cast<unsigned>(i) * 4, round);
        bench.cpu(i).write(0x50, round * 10 + static_cast<unsigned>(i));
      });
    at_once(writes);
    const std::uint32_t last = bench.cpu(0).read(0x50);
    CHECK(last / 10 == round);
    for (int i = 0; i < 4; ++i) {
      for (unsigned word = 0; word < 4; ++word) CHECK(bench.cpu(i).read(0x40 + word * 4) == round);
      CHECK(bench.cpu(i).read(0x50) == last);
    }
    if (round % 3 != 0) continue;
    CHECK(bench.flush() == 0);
    CHECK(bench.memory.word(0x50) == last);
    for (unsigned word = 0; word < 4; ++word) CHECK(bench.memory.word(0x40 + word * 4) == round);
  }
  CHECK(bench.broken_laws() == "");
}

}  // namespace

TEST_CASE(
    "writers that miss one line at once: every write is there, in every copy and after a flush in memory",
    "[cache]") {
  std::vector<std::unique_ptr<BoxedBench>> boxes;
  for (const std::string& protocol : builtin_tables())
    for (const int kind : {0, 1}) {
      BenchOptions options;
      options.caches = 4;
      options.bus.structure = structure(kind);
      boxes.push_back(std::make_unique<BoxedBench>((protocol + std::to_string(kind)).c_str(),
                                                   load_table(protocol), options));
    }
  simulate([&] {
    for (const auto& box : boxes) {
      INFO(box->name());
      write_together(box->bench);
    }
  });
}

// ---- A victim in its write-back slot

TEST_CASE("a victim in its slot supplies a reader that is granted first, and is still written back",
          "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("dirty-owner-update"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { CHECK(bench.cpu(1).read(0x40) == 7); },
             [&] {
               sc_core::wait(ns(12));  // 1's read is granted, 0's write-back waits
               CHECK(bench.states(0x40) == "D V");
               CHECK(bench.cache(0).owned_lines() == 1);
               CHECK(bench.memory.word(0x40) == 0);
             }});
    settle();
    CHECK(supplied_by_owner(bench) == 1);
    CHECK(bench.count(BusKind::write_back) == 1);
    CHECK(bench.memory.word(0x40) == 7);
    CHECK(bench.states(0x40) == "I V");
  });
}

TEST_CASE("a victim in its slot that is taken by a read-exclusive is not written back", "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { bench.cpu(1).write(0x44, 8); }});
    settle();
    CHECK(supplied_by_owner(bench) == 1);
    CHECK(bench.count(BusKind::write_back) == 0);
    CHECK(bench.memory.count(true, 0x40) == 0);
    CHECK(bench.memory.word(0x40) == 0);
    CHECK(bench.states(0x40) == "I M");
    CHECK(bench.cpu(1).read(0x40) == 7);
    CHECK(bench.cache(0).owned_lines() == 0);
    CHECK(bench.bus->waiting() == "");
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a victim in its slot that is snooped by a reader memory learns from is not written back either",
          "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("mesi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { CHECK(bench.cpu(1).read(0x40) == 7); }});
    settle();
    CHECK(bench.count(BusKind::write_back) == 0);
    CHECK(bench.memory.count(true, 0x40) == 1);  // with the supply
    CHECK(bench.memory.word(0x40) == 7);
    CHECK(bench.states(0x40) == "I S");
    CHECK(bench.bus->totals().block_writes == 1);
  });
}

TEST_CASE("a victim in its slot takes an update, loses the ownership by it and is not written back",
          "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("dirty-owner-update"), options);
  simulate([&] {
    bench.cpu(1).read(0x40);
    bench.cpu(0).write(0x40, 7);
    settle();
    CHECK(bench.states(0x40) == "D V");
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { bench.cpu(1).write(0x44, 8); },
             [&] {
               sc_core::wait(ns(12));
               CHECK(bench.states(0x40) == "V D");
               CHECK(bench.cpu(0).debug_read(0x44) == 8);
             }});
    settle();
    CHECK(bench.count(BusKind::write_back) == 0);
    CHECK(bench.memory.word(0x40) == 0);
    CHECK(bench.states(0x40) == "I D");
    CHECK(bench.cpu(1).read(0x40) == 7);
    CHECK(bench.cpu(0).read(0x44) == 8);  // its fetch comes from the new owner
    CHECK(supplied_by_owner(bench) == 1);
  });
}

TEST_CASE("a snooped victim raises the shared line for as long as it is in its slot", "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("dragon"), options);
  simulate([&] {
    bench.cpu(1).read(0x40);
    bench.cpu(0).write(0x40, 7);
    settle();
    CHECK(bench.states(0x40) == "Sm Sc");
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { bench.cpu(1).write(0x44, 8); }});
    CHECK(bench.cache(1).state_of(0x40) == "Sm");  // not alone: 0's copy still heard the update
    settle();
    CHECK(bench.count(BusKind::write_back) == 0);
    bench.cpu(1).write(0x44, 9);
    CHECK(bench.cache(1).state_of(0x40) == "M");
  });
}

TEST_CASE("a line that its own cache wants back waits for its write-back and comes from memory", "[cache]") {
  Bench bench(load_table("msi"), one_line_caches(2));
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    const Picoseconds start = now_ps();
    Picoseconds back = 0;
    at_once({[&] { bench.cpu(0).read(0x80); },
             [&] {
               sc_core::wait(ns(3));
               CHECK(bench.cpu(0).read(0x40) == 7);
               back = now_ps();
             }});
    // Write-back granted at 15, its beats until 40, memory has it at 100: then arbitration, address, snoop,
    // memory, beats.
    CHECK(back == start + ps(100 + 5 + 5 + 5 + 60 + 20));
    CHECK(bench.memory.requests.back().at == start + ps(115));
    CHECK(bench.count(BusKind::write_back) == 1);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a line that its own cache wants back is somebody else's by then", "[cache]") {
  BenchOptions options = one_line_caches(2);
  prefer(options, 1);
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    at_once({[&] { bench.cpu(0).read(0x80); }, [&] { bench.cpu(1).write(0x44, 8); },
             [&] {
               sc_core::wait(ns(3));
               CHECK(bench.cpu(0).read(0x40) == 7);
               CHECK(bench.cpu(0).read(0x44) == 8);
             }});
    settle();
    CHECK(bench.count(BusKind::write_back) == 0);
    CHECK(supplied_by_owner(bench) == 2);
    CHECK(bench.memory.word(0x44) == 8);  // with the second supply
  });
}

// ---- One transaction a line

TEST_CASE("a transaction for a line under way waits at the bus while others pass", "[cache]") {
  BenchOptions options;
  options.caches = 3;
  Bench bench(load_table("msi"), options);
  bench.memory.latency = ns(200);
  simulate([&] {
    Picoseconds same = 0, other = 0;
    at_once({[&] { bench.cpu(0).read(0x40); },
             [&] {
               bench.cpu(1).read(0x40);
               same = now_ps();
             },
             [&] {
               bench.cpu(2).read(0x80);
               other = now_ps();
             }});
    CHECK(other == ps(240 + 20));  // granted at 15, past port 1: data at 225, beats behind the first's
    CHECK(same ==
          ps(240 + 5 + 5 + 200 + 20));  // granted with the last beat of the first, which is on an edge
    CHECK(bench.memory.requests.size() == 3);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a later request of the same port passes one that waits for its line", "[cache]") {
  BenchOptions options;
  Bench bench(load_table("msi"), options);
  bench.memory.latency = ns(200);
  simulate([&] {
    Picoseconds same = 0, other = 0;
    at_once({[&] { bench.cpu(0).read(0x40); },
             [&] {
               bench.cpu(1).read(0x40);
               same = now_ps();
             },
             [&] {
               sc_core::wait(ns(3));
               bench.cpu(1).read(0x80);
               other = now_ps();
             }});
    CHECK(other == ps(260));
    CHECK(same == ps(240 + 5 + 5 + 200 + 20));
  });
}

TEST_CASE("nobody reads a line before memory has taken what its owner supplied", "[cache]") {
  BenchOptions options;
  options.caches = 3;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    bench.memory.hold = true;
    Picoseconds first = 0, second = 0;
    const Picoseconds start = now_ps();
    at_once({[&] {
               CHECK(bench.cpu(1).read(0x40) == 7);
               first = now_ps();
             },
             [&] {
               CHECK(bench.cpu(2).read(0x40) == 7);
               second = now_ps();
             },
             [&] {
               sc_core::wait(ns(300));
               CHECK(first == start + ps(50));  // the requester does not wait for memory
               CHECK(second == 0);
               REQUIRE(bench.memory.held.size() == 1);
               CHECK(bench.memory.held.front()->is_write());
               bench.memory.respond();
               sc_core::wait(ns(40));
               REQUIRE(bench.memory.held.size() == 1);
               CHECK(bench.memory.held.front()->is_read());
               bench.memory.respond();
             }});
    CHECK(second > start + ps(300));
    CHECK(bench.states(0x40) == "S S S");
    CHECK(bench.memory.word(0x40) == 7);
  });
}

TEST_CASE("a supplied copy that goes before memory has it loses nothing", "[cache]") {
  BenchOptions options = one_line_caches(3);
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    bench.memory.hold = true;
    at_once({[&] { bench.cpu(1).read(0x40); },
             [&] {
               sc_core::wait(ns(60));  // the last beat has come, memory has nothing
               bench.cache(0).replace(0x40, sc_core::SC_ZERO_TIME);
               bench.cache(1).replace(0x40, sc_core::SC_ZERO_TIME);
               CHECK(bench.states(0x40) == "I I I");
               CHECK(bench.memory.word(0x40) == 0);
               CHECK(bench.cpu(2).debug_read(0x40) == 7);
             },
             [&] {
               sc_core::wait(ns(70));
               CHECK(bench.cpu(2).read(0x40) == 7);
             },
             [&] {
               sc_core::wait(ns(200));
               bench.memory.hold = false;
               bench.memory.respond();
             }});
    CHECK(bench.memory.word(0x40) == 7);
  });
}

TEST_CASE("a read that is granted behind a write of the same word sees it, a hit before its effect does not",
          "[cache]") {
  Bench bench(load_table("write-through-update"));
  simulate([&] {
    bench.cpu(0).read(0x40);
    settle();
    std::uint32_t seen = 1;
    at_once({[&] { bench.cpu(0).write(0x40, 5); }, [&] { seen = bench.cpu(1).read(0x40); }});
    CHECK(seen == 5);
    settle();
    at_once({[&] { bench.cpu(0).write(0x44, 6); }, [&] { seen = bench.cpu(1).read(0x44); }});
    CHECK(seen == 0);
    CHECK(bench.cpu(1).read(0x44) == 6);
  });
}

// ---- Nobody starves

TEST_CASE("a processor that writes a line all the time does not keep another from writing it", "[cache]") {
  Bench bench(load_table("competitive-update", 1));  // each update ends the other's copy
  simulate([&] {
    bool written = false;
    unsigned tries = 0;
    at_once({[&] {
               while (!written && ++tries < 1000) bench.cpu(0).write(0x40, tries);
             },
             [&] {
               sc_core::wait(ns(500));
               tries = 0;
               bench.cpu(1).write(0x44, 1);
               written = true;
             }});
    CHECK(tries < 100);
  });
}

TEST_CASE("replace() comes to an end while the processor goes on", "[cache]") {
  BenchOptions options;
  options.geometry = {64, 2, 32, Replacement::lru, 1};
  options.cache.write_back_slots = 1;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bool replaced = false;
    unsigned n = 0;
    std::vector<std::function<void()>> bodies{[&] {
      sc_core::wait(ns(2000));
      for (std::uint64_t line = 0; line < 0x200; line += 0x20)
        bench.cache(0).replace(line, sc_core::SC_ZERO_TIME);
      replaced = true;
    }};
    for (unsigned who = 0; who < 3; ++who)
      bodies.push_back([&, who] {
        while (!replaced && ++n < 3000) bench.cpu(0).write((n * 7 + who) % 16 * 0x20, n);
      });
    at_once(bodies);
    CHECK(n < 2000);
    CHECK(bench.broken_laws() == "");
  });
}
