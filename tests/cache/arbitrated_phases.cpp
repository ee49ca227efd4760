// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The processor side of a cache in arbitrated timing: b_transport, and the four phases of nb_transport (IEEE
// 1666-2011, 15.2). Clock 5 ns, hit 1 ns; an idle miss in memory takes 100 ns: see
// tests/bus/arbitrated_timing.cpp.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

using Access = Requester::Access;
constexpr auto ok = tlm::TLM_OK_RESPONSE;

}  // namespace

TEST_CASE("b_transport first waits for the delay it is given, and returns a delay of 0 when all is done",
          "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    std::uint32_t value = 0;
    bench.memory.poke(0x40, 0x1234);
    bench.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x40, &value, 4, ns(30));  // throws if a delay is left
    CHECK(sc_core::sc_time_stamp() == ns(130 + 0));
    CHECK(value == 0x1234);
    CHECK(bench.cache(0).totals().latency().max() == ps(100));  // the delay is the caller's own time
    bench.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x40, &value, 4, ns(7));
    CHECK(sc_core::sc_time_stamp() == ns(138));
  });
}

TEST_CASE("b_transport calls of several processes wait side by side", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    at_once({[&] { bench.cpu(0).read(0x40); }, [&] { bench.cpu(0).read(0x80); },
             [&] { bench.cpu(0).read(0x44); }});
    CHECK(sc_core::sc_time_stamp() == ns(120));
    CHECK(bench.count(BusKind::read) == 2);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a miss answers END_REQ after its lookup and BEGIN_RESP when it is done", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    bench.memory.poke(0x40, 77);
    Access& access = bench.cpu(0).send("a", tlm::TLM_READ_COMMAND, 0x40, 0, 4, ns(13));
    settle();
    CHECK(bench.cpu(0).heard == "a END_REQ, a BEGIN_RESP");
    CHECK(access.ended_request == ps(14));  // the annotated 13 and the lookup
    CHECK(access.responded == ps(15 + 5 + 5 + 5 + 60 + 20));
    CHECK(access.get_response_status() == ok);
    CHECK(access.value() == 77);
    CHECK(bench.cache(0).totals().latency().max() == access.responded - access.sent);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a hit answers BEGIN_RESP instead of END_REQ", "[cache]") {
  Bench bench(load_table("mesi"));
  simulate([&] {
    bench.cpu(0).read(0x40);
    settle();
    const Picoseconds start = now_ps();
    Access& write = bench.cpu(0).send_write("w", 0x40, 5);
    sc_core::wait(ns(1));
    sc_core::wait(sc_core::SC_ZERO_TIME);
    Access& read = bench.cpu(0).send_read("r", 0x40);
    settle();
    CHECK(bench.cpu(0).heard == "w BEGIN_RESP, r BEGIN_RESP");
    CHECK(write.responded == start + ps(1));
    CHECK(read.responded == start + ps(2));
    CHECK(read.value() == 5);
    const CacheTotals totals = bench.cache(0).totals();
    CHECK(totals.kind[static_cast<std::size_t>(AccessKind::write_hit)].count() == 1);
    CHECK(totals.kind[static_cast<std::size_t>(AccessKind::read_hit)].count() == 1);
  });
}

TEST_CASE("a hit is answered before an older miss to another line", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    bench.cpu(0).read(0x40);
    settle();
    const Picoseconds start = now_ps();
    Access& miss = bench.cpu(0).send_read("miss", 0x80);
    bench.cpu(0).on_end_request = [&](Access&) {
      bench.cpu(0).send_read("hit", 0x44);  // from within nb_transport_bw
      return tlm::TLM_ACCEPTED;
    };
    settle();
    CHECK(bench.cpu(0).heard == "miss END_REQ, hit BEGIN_RESP, miss BEGIN_RESP");
    CHECK(miss.responded == start + ps(100));
  });
}

TEST_CASE("an access to a line being fetched joins that miss: one transaction, its parts from there on",
          "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.send_read("a", 0x40);
    sc_core::wait(ns(12));
    Access& joined = cpu.send_read("b", 0x48);
    settle();
    CHECK(cpu.heard == "a END_REQ, b END_REQ, a BEGIN_RESP, b BEGIN_RESP");
    CHECK(joined.responded == ps(100));
    CHECK(bench.count(BusKind::read) == 1);
    CHECK(bench.memory.requests.size() == 1);
    const CacheTotals totals = bench.cache(0).totals();
    CHECK(totals.misses == 2);
    CHECK(totals.kind[static_cast<std::size_t>(AccessKind::miss_from_memory)].count() == 2);
    // a: 1 + 9 + 5 + 5 + 60 + 20. b, from 13 on: lookup 1, rest of the address phase 2, then the same.
    CHECK(totals.parts[LatencyPart::hit] == ps(2));
    CHECK(totals.parts[LatencyPart::wait_for_grant] == ps(9));
    CHECK(totals.parts[LatencyPart::transfer] == ps(25 + 22));
    CHECK(totals.parts[LatencyPart::snoop] == ps(10));
    CHECK(totals.parts[LatencyPart::memory_array] == ps(120));
    CHECK(totals.parts.total() == ps(100 + 88));
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("what joins a miss takes effect in its order: write, read, write, read of one word", "[cache]") {
  Bench bench(load_table("dirty-owner-update"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    std::vector<Access*> reads;
    unsigned next = 0;
    const auto send = [&] {
      if (next == 8) return;
      const std::string name = std::to_string(next);
      if (next % 2 == 0)
        cpu.send_write(name, 0x40, 100 + next);
      else
        reads.push_back(&cpu.send_read(name, 0x40));
      ++next;
    };
    cpu.on_end_request = [&](Access&) {
      send();
      return tlm::TLM_ACCEPTED;
    };
    send();
    settle();
    REQUIRE(reads.size() == 4);
    for (unsigned i = 0; i < 4; ++i) CHECK(reads[i]->value() == 100 + 2 * i);
    std::string responses;
    for (std::size_t at = 0; (at = cpu.heard.find(" BEGIN_RESP", at)) != std::string::npos; ++at)
      responses += cpu.heard[at - 1];
    CHECK(responses == "01234567");
    CHECK(bench.count(BusKind::read) == 1);
    CHECK(bench.count(BusKind::update) == 4);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("END_REQ is withheld while every miss is in use", "[cache]") {
  BenchOptions options;
  options.cache.misses = 2;
  options.geometry = {1024, 8, 32, Replacement::lru, 1};
  Bench bench(load_table("msi"), options);
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    std::array<Access*, 3> all{};
    unsigned next = 0;
    const auto send = [&] {
      if (next < 3) all[next] = &cpu.send_read(std::to_string(next), 0x100 * (next + 1));
      ++next;
    };
    cpu.on_end_request = [&](Access&) {
      send();
      return tlm::TLM_ACCEPTED;
    };
    send();
    settle();
    CHECK(all[0]->ended_request == ps(1));
    CHECK(all[1]->ended_request == ps(2));
    CHECK(all[2]->ended_request == ps(100));  // the end of the first miss
    CHECK(all[1]->responded == ps(120));
    CHECK(all[2]->responded == ps(195));
    CHECK(cpu.heard == "0 END_REQ, 1 END_REQ, 0 BEGIN_RESP, 2 END_REQ, 1 BEGIN_RESP, 2 BEGIN_RESP");
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("END_REQ is withheld while the victim finds no write-back slot and while the line is leaving",
          "[cache]") {
  BenchOptions options;
  options.geometry = {64, 2, 32, Replacement::lru, 1};  // one set of two ways
  options.cache.write_back_slots = 1;
  Bench bench(load_table("msi"), options);
  bench.memory.latency = ns(60);
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.write(0x00, 1);
    cpu.write(0x20, 2);
    settle();
    const Picoseconds start = now_ps();
    Access& first =
        cpu.send_read("first", 0x40);  // 0x00 leaves: write-back granted at 15, memory has it at 100
    Access* second = nullptr;
    cpu.on_end_request = [&](Access& access) {
      if (&access == &first) second = &cpu.send_read("second", 0x60);  // 0x20 would leave too
      return tlm::TLM_ACCEPTED;
    };
    settle();
    CHECK(first.ended_request == start + ps(1));
    CHECK(second->ended_request == start + ps(100));
    settle();
    cpu.on_end_request = [](Access&) { return tlm::TLM_ACCEPTED; };
    cpu.write(0x40, 3);
    settle();
    // 0x60 is least recently used and clean; then 0x40, which is not.
    const Picoseconds again = now_ps();
    cpu.read(0x80);
    settle();
    Access& third = cpu.send_read("third", 0xa0);
    sc_core::wait(ns(2));
    Access& back = cpu.send_read("back", 0x40);  // just left
    settle();
    CHECK(third.ended_request > again);
    CHECK(back.ended_request - third.ended_request == ps(99));  // when memory has it
    CHECK(back.value() == 3);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a later hit passes an access that waits for a place, a later access to the same line does not",
          "[cache]") {
  BenchOptions options;
  options.cache.misses = 1;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).read(0x40);
    settle();
    const Picoseconds start = now_ps();
    Picoseconds hit = 0;
    std::string order;
    at_once({[&] { bench.cpu(0).read(0x80); },
             [&] {
               sc_core::wait(ns(1));
               bench.cpu(0).write(0x100, 7);
               order += 'w';
             },
             [&] {
               sc_core::wait(ns(2));
               CHECK(bench.cpu(0).read(0x100) == 7);
               order += 'r';
             },
             [&] {
               sc_core::wait(ns(3));
               bench.cpu(0).read(0x40);
               hit = now_ps();
             }});
    CHECK(hit == start + ps(4));
    CHECK(order == "wr");
    CHECK(bench.count(BusKind::read) + bench.count(BusKind::read_exclusive) == 3);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE(
    "a hit does not pass an earlier access to its own line, whether that waits for a place or for the bus",
    "[cache]") {
  BenchOptions options;
  options.cache.misses = 1;
  BoxedBench waits("waits", load_table("msi"), options), asks("asks", load_table("msi"), options);
  simulate([&] {
    for (Bench* const bench : {&waits.bench, &asks.bench}) {
      Requester& cpu = bench->cpu(0);
      for (const std::uint64_t line : {0x40u, 0x60u}) cpu.read(line);
      settle();
      std::uint32_t first = 0, second = 0;
      at_once({[&] {
                 if (bench == &waits.bench) cpu.read(0x100);
               },
               [&] {
                 sc_core::wait(ns(2));
                 cpu.write(0x40, 7);  // an upgrade
               },
               [&] {
                 sc_core::wait(ns(4));
                 first = cpu.read(0x40);  // its copy is there and readable
               },
               [&] {
                 sc_core::wait(ns(6));
                 second = cpu.read(0x40);
               }});
      CHECK(first == 7);
      CHECK(second == 7);
      CHECK(bench->broken_laws() == "");
    }
  });
}

TEST_CASE("accesses of one line that wait for a place get it in their order", "[cache]") {
  BenchOptions options;
  options.cache.misses = 1;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.read(0x40);
    settle();
    // The second has the first one's miss before any of the line's, all but the first of which would hit.
    std::vector<std::function<void()>> bodies{[&] { cpu.read(0x100); },
                                              [&] {
                                                sc_core::wait(ns(1));
                                                cpu.read(0x200);
                                              }};
    std::array<std::uint32_t, 4> seen{};
    for (unsigned i = 0; i < 4; ++i) {
      bodies.push_back([&, i] {
        sc_core::wait(ns(2 + 4 * i));
        cpu.write(0x44, i + 1);
      });
      bodies.push_back([&, i] {
        sc_core::wait(ns(4 + 4 * i));
        seen[i] = cpu.read(0x44);
      });
    }
    at_once(bodies);
    CHECK(seen == std::array<std::uint32_t, 4>{1, 2, 3, 4});
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("responses that wait for the initiator are sent in the order in which they were ready", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_ACCEPTED; };
    std::array<Access*, 3> all{};
    for (unsigned i = 0; i < 3; ++i) {
      all[i] = &cpu.send_read(std::to_string(i), 0x40 + i * 0x20);
      sc_core::wait(ns(3));
    }
    settle();
    for (unsigned i = 0; i < 3; ++i) {
      cpu.phase(*all[i], tlm::END_RESP);
      sc_core::wait(ns(1));
    }
    CHECK(cpu.heard == "0 END_REQ, 1 END_REQ, 2 END_REQ, 0 BEGIN_RESP, 1 BEGIN_RESP, 2 BEGIN_RESP");
  });
}

TEST_CASE("one response phase at a time: later responses wait for END_RESP", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.read(0x40);
    settle();
    cpu.on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_ACCEPTED; };
    Access& a = cpu.send_read("a", 0x40);
    sc_core::wait(ns(5));
    Access& b = cpu.send_read("b", 0x40);
    sc_core::wait(ns(20));
    CHECK(cpu.heard == "a BEGIN_RESP");  // b has neither END_REQ nor BEGIN_RESP
    CHECK(cpu.phase(a, tlm::END_RESP) == tlm::TLM_COMPLETED);
    CHECK(cpu.heard == "a BEGIN_RESP");  // no call on one path from within a call on the other
    const Picoseconds ended = now_ps();
    sc_core::wait(ns(3));
    CHECK(cpu.heard == "a BEGIN_RESP, b BEGIN_RESP");
    CHECK(b.responded == ended);
    // With a time: only then.
    const Picoseconds start = now_ps();
    CHECK(cpu.phase(b, tlm::END_RESP, ns(10)) == tlm::TLM_COMPLETED);
    Access& c = cpu.send_read("c", 0x40);
    settle();
    CHECK(c.responded == start + ps(10));
    CHECK(cpu.phase(c, tlm::END_RESP) == tlm::TLM_COMPLETED);
  });
}

TEST_CASE(
    "an initiator may end a response by TLM_COMPLETED, TLM_UPDATED or END_RESP, within the call or later",
    "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.read(0x40);
    settle();
    unsigned answered = 0;
    cpu.on_response = [&](Access& access, tlm::tlm_phase& phase, sc_core::sc_time& time) {
      switch (answered++ % 5) {
        case 0:
          return tlm::TLM_COMPLETED;
        case 1:
          time = ns(2);
          return tlm::TLM_COMPLETED;
        case 2:
          phase = tlm::END_RESP;
          return tlm::TLM_UPDATED;
        case 3:
          phase = tlm::END_RESP;
          time = ns(2);
          return tlm::TLM_UPDATED;
        default:
          CHECK(cpu.phase(access, tlm::END_RESP) == tlm::TLM_COMPLETED);
          return tlm::TLM_ACCEPTED;
      }
    };
    for (unsigned i = 0; i < 20; ++i) {
      cpu.send_read(std::to_string(i), 0x40);
      sc_core::wait(ns(1 + i % 3));
      sc_core::wait(sc_core::SC_ZERO_TIME);
      while (cpu.heard.find(std::to_string(i) + " BEGIN_RESP") == std::string::npos)
        sc_core::wait(cpu.changed);
    }
    settle();
    CHECK(answered == 20);
    CHECK(bench.cache(0).totals().reads == 21);
  });
}

TEST_CASE("an initiator may send its next request from within BEGIN_RESP, before or after END_RESP",
          "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    unsigned left = 30;
    std::function<void()> next = [&] {
      if (left-- > 0) cpu.send_read(std::to_string(left), 0x40 + left % 5 * 0x20);
    };
    bool before = false;
    cpu.on_response = [&](Access& access, tlm::tlm_phase&, sc_core::sc_time&) {
      before = !before;
      if (before) next();
      CHECK(cpu.phase(access, tlm::END_RESP) == tlm::TLM_COMPLETED);
      if (!before) next();
      return tlm::TLM_ACCEPTED;
    };
    next();
    settle();
    CHECK(bench.cache(0).totals().reads == 30);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a payload is held from BEGIN_REQ to the end of its response and no longer", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_ACCEPTED; };
    Access& access = cpu.send_read("a", 0x40);
    CHECK(access.get_ref_count() == 2);
    access.release();  // the initiator's own
    settle();
    CHECK(cpu.heard == "a END_REQ, a BEGIN_RESP");
    CHECK(cpu.freed == 0);
    cpu.phase(access, tlm::END_RESP);
    CHECK(cpu.freed == 1);
  });
}

TEST_CASE("accesses that need no line are answered: nothing to do, no data, no window", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    Access& ignored = cpu.send("i", tlm::TLM_IGNORE_COMMAND, 0x40);
    sc_core::wait(ns(5));
    Access& empty = cpu.send("e", tlm::TLM_READ_COMMAND, 0x40, 0, 0);
    sc_core::wait(ns(5));
    Access& nowhere = cpu.send("n", tlm::TLM_WRITE_COMMAND, 0x500000, 1);
    settle();
    CHECK(cpu.heard == "i BEGIN_RESP, e BEGIN_RESP, n BEGIN_RESP");
    CHECK(ignored.get_response_status() == ok);
    CHECK(empty.get_response_status() == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(nowhere.get_response_status() == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    const CacheTotals totals = bench.cache(0).totals();
    CHECK(totals.errors == 2);
    CHECK(totals.reads + totals.writes == 0);
  });
}

TEST_CASE(
    "an access over several lines, byte enables and streaming are done piece by piece and answered once",
    "[cache]") {
  Bench bench(load_table("mesi"));
  simulate([&] {
    std::array<std::uint8_t, 80> out{}, in{};
    for (std::size_t i = 0; i < out.size(); ++i) out[i] = static_cast<std::uint8_t>(i + 1);
    std::vector<std::uint8_t> enables(80, TLM_BYTE_ENABLED);
    for (std::size_t i = 0; i < 80; i += 3) enables[i] = TLM_BYTE_DISABLED;
    for (std::size_t i = 24; i < 56; ++i) enables[i] = TLM_BYTE_DISABLED;  // all of the second line's
    CHECK(bench.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x48, out.data(), 80, sc_core::SC_ZERO_TIME,
                                 enables) == ok);
    CHECK(bench.count(BusKind::read_exclusive) == 2);
    CHECK(bench.cpu(1).transport(tlm::TLM_READ_COMMAND, 0x48, in.data(), 80) == ok);
    for (std::size_t i = 0; i < 80; ++i) CHECK(in[i] == (enables[i] == TLM_BYTE_ENABLED ? out[i] : 0));
    CHECK(bench.cache(1).totals().reads == 1);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("uncached accesses are counted as such and nowhere else", "[cache]") {
  Bench bench(load_table("msi"));
  bench.device.refuses = [](const auto& payload) { return payload.get_address() == 0x40; };
  simulate([&] {
    bench.cpu(0).write(Bench::device_base, 5);
    CHECK(bench.cpu(0).read(Bench::device_base) == 5);
    bench.cpu(0).read(Bench::device_base + 0x40);
    CHECK(bench.cpu(0).status == tlm::TLM_GENERIC_ERROR_RESPONSE);
    const CacheTotals totals = bench.cache(0).totals();
    CHECK(totals.uncached == 2);
    CHECK(totals.errors == 1);
    CHECK(totals.reads + totals.writes + totals.hits + totals.misses == 0);
    CHECK(totals.latency().count() == 0);
    CHECK(bench.broken_laws() == "");
  });
}

// ---- Program order of one location, several outstanding

TEST_CASE("an uncached read does not overtake an earlier uncached write of the same initiator", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    Access* read = nullptr;
    cpu.on_end_request = [&](Access& access) {
      if (access.name == "w") read = &cpu.send_read("r", Bench::device_base);
      return tlm::TLM_ACCEPTED;
    };
    // So many beats that the read's address phase is over long before the write's data is there.
    cpu.send("w", tlm::TLM_WRITE_COMMAND, Bench::device_base, 9, 64);
    settle();
    REQUIRE(read != nullptr);
    CHECK(read->value() == 9);
    CHECK(bench.device.requests.front().write);
  });
}

TEST_CASE("an access over two lines keeps its place in both before later accesses", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.write(0x60, 1);  // the second line is there and may be written, the first is not
    settle();
    Access* read = nullptr;
    const auto follow = [&] {  // at the first moment at which the initiator may
      if (read == nullptr) read = &cpu.send_read("r", 0x60);
    };
    cpu.on_end_request = [&](Access&) {
      follow();
      return tlm::TLM_ACCEPTED;
    };
    cpu.on_response = [&](Access&, tlm::tlm_phase&, sc_core::sc_time&) {
      follow();
      return tlm::TLM_COMPLETED;
    };
    cpu.send("w", tlm::TLM_WRITE_COMMAND, 0x5c, 2, 8);
    settle();
    REQUIRE(read != nullptr);
    CHECK(read->value() == 2);
  });
}

TEST_CASE("the request of an access over two missing lines ends when the second has its place", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    Access& wide = cpu.send("w", tlm::TLM_WRITE_COMMAND, 0x5c, 2, 8);
    settle();
    CHECK(cpu.heard == "w END_REQ, w BEGIN_RESP");
    CHECK(wide.ended_request == ps(101));
    CHECK(wide.responded == ps(100 + 100));
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("an access over lines that ends in an error leaves nothing behind for the next one", "[cache]") {
  Bench bench(load_table("msi"));
  bench.memory.refuses = [](const auto&) { return true; };
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.send("wide", tlm::TLM_READ_COMMAND, 0x40, 0, 96);
    settle();
    cpu.send_read("device", Bench::device_base);
    settle();
    CHECK(cpu.heard == "wide BEGIN_RESP, device END_REQ, device BEGIN_RESP");
  });
}
