// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Arbitrated timing when something goes wrong: memory refuses, a process is killed while it waits.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr auto ok = tlm::TLM_OK_RESPONSE;
constexpr auto refused = tlm::TLM_GENERIC_ERROR_RESPONSE;
constexpr const char* memory_id = "/earshot/cache/memory";

// Memory refuses reads, writes or both of the line at 0x40.
void refuse(Bench& bench, bool reads, bool writes) {
  bench.memory.refuses = [=](const tlm::tlm_generic_payload& payload) {
    return payload.get_address() / 32 == 2 && (payload.is_write() ? writes : reads);
  };
}

BenchOptions one_line_caches(int caches) {
  BenchOptions options;
  options.caches = caches;
  options.geometry = {32, 1, 32, Replacement::lru, 1};
  return options;
}

}  // namespace

// ---- Memory refuses

TEST_CASE("a fetch that memory refuses is answered as memory said it, and nothing is cached", "[cache]") {
  Bench bench(load_table("dirty-owner-update"));
  simulate([&] {
    bench.cpu(0).write(0x140, 7);  // the same set
    settle();
    refuse(bench, true, false);
    const Picoseconds start = now_ps();
    bench.cpu(0).write(0x40, 1);
    CHECK(bench.cpu(0).status == refused);
    CHECK(now_ps() - start == ps(80));  // it comes with memory's answer, no data is moved
    CHECK(bench.states(0x40) == "I I");
    bench.cpu(1).read(0x40);
    CHECK(bench.cpu(1).status == refused);
    CHECK(bench.cache(0).totals().errors == 1);
    CHECK(bench.bus->totals().supplied_by_memory == 1);
    refuse(bench, false, false);
    CHECK(bench.cpu(1).read(0x40) == 0);
    CHECK(bench.cpu(1).status == ok);
    CHECK(bench.cpu(0).read(0x140) == 7);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("every access that joined a refused fetch gets an answer of its own", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    unsigned asked = 0;
    bench.memory.refuses = [&](const tlm::tlm_generic_payload&) { return ++asked == 1; };  // only the first
    tlm::tlm_response_status first = ok, second = refused;
    std::uint32_t value = 0;
    bench.memory.poke(0x44, 9);
    at_once({[&] { first = bench.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x40, &value, 4); },
             [&] {
               sc_core::wait(ns(2));
               std::uint32_t other = 0;
               second = bench.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x44, &other, 4);
               CHECK(other == 9);
             }});
    CHECK(first == refused);
    CHECK(second == ok);
    CHECK(bench.states(0x40) == "S I");
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("an access over lines stops at the one that memory refuses", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    refuse(bench, true, true);
    std::array<std::uint8_t, 96> data{};
    CHECK(bench.cpu(0).transport(tlm::TLM_READ_COMMAND, 0x20, data.data(), 96) == refused);
    CHECK(bench.states(0x20) == "S I");
    CHECK(bench.states(0x60) == "I I");
    CHECK(bench.cache(0).totals().errors == 1);
    CHECK(bench.broken_laws() == "");
  });
}

namespace {

// The writer's copy and the reader's stay as they are, and so does memory.
void check_refused_write_through(const std::string& protocol, const std::string& states) {
  Bench bench(load_table(protocol));
  simulate([&] {
    bench.memory.poke(0x40, 3);
    bench.cpu(0).read(0x40);
    bench.cpu(1).read(0x40);
    settle();
    refuse(bench, false, true);
    bench.cpu(0).write(0x40, 4);
    CHECK(bench.cpu(0).status == refused);
    CHECK(bench.states(0x40) == states);
    CHECK(bench.cpu(0).read(0x40) == 3);
    CHECK(bench.cpu(1).read(0x40) == 3);
    CHECK(bench.memory.word(0x40) == 3);
    CHECK(bench.bus->totals().word_writes == 0);
    refuse(bench, false, false);
    bench.cpu(0).write(0x40, 5);
    CHECK(bench.cpu(0).status == ok);
    CHECK(bench.cpu(1).read(0x40) == 5);
    CHECK(bench.broken_laws() == "");
  });
}

}  // namespace

TEST_CASE("a write-through that memory refuses changes nothing: write-through-update", "[cache]") {
  check_refused_write_through("write-through-update", "V V");
}
TEST_CASE("a write-through that memory refuses changes nothing: write-once", "[cache]") {
  check_refused_write_through("write-once", "V V");
}
TEST_CASE("a write-through that memory refuses changes nothing: firefly", "[cache]") {
  check_refused_write_through("firefly", "S S");
}

TEST_CASE("a write-back that memory refuses is reported, its line stays snooped and is not lost", "[cache]") {
  sc_core::sc_report_handler::set_actions(memory_id, sc_core::SC_ERROR, sc_core::SC_CACHE_REPORT);
  Bench bench(load_table("msi"), one_line_caches(2));
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    refuse(bench, false, true);
    settle();
    CHECK(bench.cpu(0).read(0x80) == 0);
    CHECK(bench.cpu(0).status == ok);  // it belongs to no access
    settle();
    CHECK(sc_core::sc_report_handler::get_count(memory_id, sc_core::SC_ERROR) == 1);
    CHECK(bench.cache(0).owned_lines() == 1);
    CHECK(bench.states(0x40) == "M I");
    CHECK(bench.cpu(1).debug_read(0x40) == 7);
    bench.cpu(1).write(0x44, 8);  // the owner in the slot supplies
    CHECK(bench.cpu(1).read(0x40) == 7);
    CHECK(bench.states(0x40) == "I M");
    // The slot is free again, and the cache may have the line back.
    CHECK(bench.cache(0).owned_lines() == 0);
    refuse(bench, false, false);
    bool back = false;
    sc_core::sc_spawn([&] { back = bench.cpu(0).read(0x44) == 8; });
    settle();
    CHECK(back);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a processor that wants a line whose write-back was refused is told so", "[cache]") {
  sc_core::sc_report_handler::set_actions(memory_id, sc_core::SC_ERROR, sc_core::SC_CACHE_REPORT);
  Bench bench(load_table("msi"), one_line_caches(2));
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    refuse(bench, false, true);
    settle();
    bool first = false, second = false, third = false;
    sc_core::sc_spawn([&] {
      bench.cpu(0).read(0x80);
      bench.cpu(0).read(0x40);  // asked for while its write-back is under way
      first = bench.cpu(0).status == refused;
      bench.cpu(0).read(0x40);
      second = bench.cpu(0).status == refused;
      // With its only slot lost, the cache can replace clean lines, no others.
      bench.cpu(0).write(0x80, 1);
      CHECK(bench.cpu(0).status == ok);
      bench.cpu(0).read(0xc0);
      third = bench.cpu(0).status == refused;
    });
    settle();
    CHECK(first);
    CHECK(second);
    CHECK((third || bench.cpu(0).status == ok));  // two slots by default
    CHECK(bench.cpu(1).debug_read(0x40) == 7);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("what waits for a write-back slot does not wait for one that memory has refused", "[cache]") {
  sc_core::sc_report_handler::set_actions(memory_id, sc_core::SC_ERROR, sc_core::SC_CACHE_REPORT);
  BenchOptions options;
  options.geometry = {64, 2, 32, Replacement::lru, 1};
  options.cache.write_back_slots = 1;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    bench.cpu(0).write(0x60, 8);
    refuse(bench, false, true);
    settle();
    unsigned answered = 0;
    for (const std::uint64_t line : {0x80u, 0xa0u})  // the second waits for the slot of the first's victim
      sc_core::sc_spawn([&, line] {
        bench.cpu(0).read(line);
        ++answered;
      });
    bool replaced = false;
    sc_core::sc_spawn([&] {
      sc_core::wait(ns(2));
      bench.cache(0).replace(0x60, sc_core::SC_ZERO_TIME);
      replaced = true;
    });
    settle();
    CHECK(answered == 2);
    CHECK(replaced);
    CHECK(bench.cpu(1).read(0x60) == 8);
    CHECK(bench.cpu(1).read(0x40) == 7);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("flush() counts the lines that memory did not take and comes to an end", "[cache]") {
  sc_core::sc_report_handler::set_actions(memory_id, sc_core::SC_ERROR, sc_core::SC_CACHE_REPORT);
  BenchOptions options;
  options.cache.write_back_slots = 1;
  BoxedBench one("one", load_table("msi"), options);
  options.cache.write_back_slots = 3;
  BoxedBench three("three", load_table("msi"), options);
  simulate([&] {
    for (Bench* const bench : {&one.bench, &three.bench}) {
      for (const std::uint64_t line : {0x00u, 0x20u, 0x40u, 0x60u}) bench->cpu(0).write(line, 7);
      bench->memory.refuses = [](const tlm::tlm_generic_payload& payload) {
        return payload.is_write() && (payload.get_address() == 0x20 || payload.get_address() == 0x40);
      };
      std::uint64_t left = 0;
      bool ended = false;
      sc_core::sc_spawn([&] {
        sc_core::sc_time delay;
        left = bench->cache(0).flush(delay);
        ended = true;
      });
      settle();
      CHECK(ended);
      CHECK(left == bench->cache(0).owned_lines());
      CHECK(left >= 2);
      CHECK(bench->cpu(1).debug_read(0x20) == 7);
      CHECK(bench->cpu(1).debug_read(0x40) == 7);
      CHECK(bench->memory.word(0x00) == 7);
      if (bench == &three.bench) {
        CHECK(left == 2);
        CHECK(bench->memory.word(0x60) == 7);
      }
    }
  });
}

TEST_CASE("an uncached access that the target refuses is answered so, with no data moved into it",
          "[cache]") {
  Bench bench(load_table("msi"));
  bench.device.refuses = [](const tlm::tlm_generic_payload&) { return true; };
  simulate([&] {
    CHECK(bench.cpu(0).read(Bench::device_base) == 0xdeadbeef);
    CHECK(bench.cpu(0).status == refused);
    bench.cpu(0).write(Bench::device_base, 4);
    CHECK(bench.cpu(0).status == refused);
    CHECK(bench.cpu(0).read(0x40) == 0);
    CHECK(bench.cpu(0).status == ok);
    CHECK(bench.broken_laws() == "");
  });
}

// ---- A process is killed in b_transport

namespace {

// Kills an access of cpu 0 after every number of nanoseconds, on fresh lines: whatever it was, the others go
// on, and each word holds the old value or the new.
void check_kills(const std::string& protocol, bool non_idle,
                 const std::function<void(Bench&, std::uint64_t)>& prepare,
                 const std::function<void(Bench&, std::uint64_t)>& access) {
  BenchOptions options = one_line_caches(3);
  options.geometry = {256, 2, 32, Replacement::lru, 1};
  Bench bench(load_table(protocol), options);
  simulate([&] {
    for (unsigned after = 0; after < 260; after += 3) {
      const std::uint64_t line = 0x1000 + after * 32;
      INFO(protocol << ", killed after " << after << " ns");
      prepare(bench, line);
      settle();
      sc_core::sc_process_handle doomed = sc_core::sc_spawn([&] { access(bench, line); });
      bool joined = !non_idle;
      if (non_idle)
        sc_core::sc_spawn([&, line] {  // another access of the same cache, joining in
          sc_core::wait(ns(4));
          bench.cpu(0).read(line);
          bench.cpu(0).write(line + 8, after);
          joined = true;
        });
      sc_core::wait(ns(after));
      doomed.kill();
      settle();
      CHECK(joined);
      CHECK(bench.bus->waiting() == "");
      const std::uint32_t value = bench.cpu(1).read(line);
      CHECK((value == 1 || value == 2));
      bench.cpu(2).write(line, 3);
      CHECK(bench.cpu(0).read(line) == 3);
      CHECK(bench.cpu(1).read(line) == 3);
      if (non_idle) CHECK(bench.cpu(1).read(line + 8) == after);
      settle();
    }
    CHECK(bench.flush() == 0);
    CHECK(bench.broken_laws() == "");
  });
}

void write_one(Bench& bench, std::uint64_t line) {
  bench.cpu(1).write(line, 1);
}
void all_read(Bench& bench, std::uint64_t line) {
  write_one(bench, line);
  for (int i = 0; i < 3; ++i) bench.cpu(i).read(line);
}
void write_two(Bench& bench, std::uint64_t line) {
  bench.cpu(0).write(line, 2);
}
void read_it(Bench& bench, std::uint64_t line) {
  bench.cpu(0).read(line);
}
// The written word and one of the next line.
void write_over(Bench& bench, std::uint64_t line) {
  std::array<std::uint32_t, 9> words{};
  words.fill(2);
  bench.cpu(0).transport(tlm::TLM_WRITE_COMMAND, line, words.data(), sizeof words);
}

}  // namespace

TEST_CASE("a process killed in a write miss harms nobody: msi", "[cache]") {
  check_kills("msi", false, write_one, write_two);
}
TEST_CASE("a process killed in a write miss harms nobody: dirty-owner-update", "[cache]") {
  check_kills("dirty-owner-update", false, write_one, write_two);
}
TEST_CASE("a process killed in an update harms nobody: dirty-owner-update", "[cache]") {
  check_kills("dirty-owner-update", false, all_read, write_two);
}
TEST_CASE("a process killed in a write-through harms nobody: write-through-update", "[cache]") {
  check_kills("write-through-update", false, all_read, write_two);
}
TEST_CASE("a process killed in a write-through harms nobody: write-once", "[cache]") {
  check_kills("write-once", false, all_read, write_two);
}
TEST_CASE("a process killed in an upgrade harms nobody: moesi", "[cache]") {
  check_kills("moesi", false, all_read, write_two);
}
TEST_CASE("a process killed in a read miss harms nobody who joined it: mesi", "[cache]") {
  check_kills("mesi", true, write_one, read_it);
}
TEST_CASE("a process killed in a write miss harms nobody who joined it: dragon", "[cache]") {
  check_kills("dragon", true, write_one, write_two);
}
TEST_CASE("a process killed in an access over two lines harms nobody who joined it: firefly", "[cache]") {
  check_kills("firefly", true, write_one, write_over);
}
TEST_CASE("a process killed while it waits for a place harms nobody", "[cache]") {
  BenchOptions options;
  options.cache.misses = 1;
  Bench bench(load_table("msi"), options);
  simulate([&] {
    sc_core::sc_process_handle first = sc_core::sc_spawn([&] { bench.cpu(0).read(0x40); });
    sc_core::sc_process_handle second = sc_core::sc_spawn([&] { bench.cpu(0).read(0x80); });
    sc_core::wait(ns(50));
    second.kill();
    CHECK(bench.cpu(0).read(0xc0) == 0);
    settle();
    CHECK(bench.bus->waiting() == "");
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a process killed in an uncached access leaves nothing of its payload in use", "[cache]") {
  Bench bench(load_table("msi"));
  bench.device.hold = true;
  bench.device.poke(0, 0x11111111);
  simulate([&] {
    for (const bool write : {false, true})
      for (const double after : {3.0, 12.0, 40.0}) {
        // The dead access's data: whoever owns these bytes afterwards must not see them change, nor the
        // device get them.
        std::vector<std::uint8_t> data(4, 0x22);
        sc_core::sc_process_handle doomed = sc_core::sc_spawn([&] {
          bench.cpu(0).transport(write ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND, Bench::device_base,
                                 data.data(), 4);
        });
        sc_core::wait(ns(after));
        doomed.kill();
        std::fill(data.begin(), data.end(), std::uint8_t{0x33});
        settle();
        if (!bench.device.held.empty()) bench.device.respond();
        settle();
        CHECK(data == std::vector<std::uint8_t>(4, 0x33));
        CHECK((bench.device.word(0) == 0x11111111 || (write && bench.device.word(0) == 0x22222222)));
        CHECK(bench.bus->waiting() == "");
      }
    bench.device.hold = false;
    bench.cpu(1).write(Bench::device_base, 6);
    CHECK(bench.cpu(0).read(Bench::device_base) == 6);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a process killed in replace() or flush() harms nobody", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    for (std::uint64_t line = 0; line < 0x100; line += 0x20) bench.cpu(0).write(line, 5);
    settle();
    for (const double after : {1.0, 20.0, 70.0, 130.0}) {
      sc_core::sc_process_handle replacing = sc_core::sc_spawn([&] {
        bench.cache(0).replace(0x20, sc_core::SC_ZERO_TIME);
        sc_core::sc_time delay;
        bench.cache(0).flush(delay);
      });
      sc_core::wait(ns(after));
      replacing.kill();
      for (std::uint64_t line = 0; line < 0x100; line += 0x20) CHECK(bench.cpu(1).read(line) == 5);
      for (std::uint64_t line = 0; line < 0x100; line += 0x20) bench.cpu(0).write(line, 5);
    }
    CHECK(bench.flush() == 0);
    CHECK(bench.memory.word(0x20) == 5);
    CHECK(bench.broken_laws() == "");
  });
}
