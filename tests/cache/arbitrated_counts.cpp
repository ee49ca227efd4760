// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What accesses are counted as in arbitrated timing when the line changes between lookup and grant.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

std::uint64_t count_of(const CacheTotals& totals, AccessKind kind) {
  return totals.kind[static_cast<std::size_t>(kind)].count();
}

// Two caches with a copy each, whose processors write the line at once: the second one's copy goes at the first's
// grant, so that it fetches.
void check_lost_copy(const std::string& protocol) {
  Bench bench(load_table(protocol));
  simulate([&] {
    bench.cpu(0).read(0x40);
    bench.cpu(1).read(0x40);
    settle();
    at_once({[&] { bench.cpu(0).write(0x40, 1); }, [&] { bench.cpu(1).write(0x44, 2); }});
    settle();
    const CacheTotals first = bench.cache(0).totals(), second = bench.cache(1).totals();
    CHECK(count_of(first, AccessKind::upgrade) == 1);
    CHECK(first.hits == 1);
    CHECK(first.misses == 1);
    CHECK(count_of(second, AccessKind::upgrade) == 0);
    CHECK(count_of(second, AccessKind::miss_from_owner) == 1);
    CHECK(second.hits == 0);
    CHECK(second.misses == 2);
    CHECK(bench.broken_laws() == "");
  });
}

}  // namespace

TEST_CASE("a write that lost its copy before its grant counts as a miss, msi", "[cache]") {
  check_lost_copy("msi");
}
TEST_CASE("a write that lost its copy before its grant counts as a miss, moesi", "[cache]") {
  check_lost_copy("moesi");
}

TEST_CASE("a supplied line that memory refuses to take is reported and is no block write", "[bus]") {
  constexpr const char* memory_id = "/earshot/bus/memory";
  sc_core::sc_report_handler::set_actions(memory_id, sc_core::SC_ERROR, sc_core::SC_CACHE_REPORT);
  BenchOptions options;
  options.watched = false;  // memory stays stale with nobody owning the line
  Bench bench(load_table("msi"), options);
  simulate([&] {
    bench.cpu(0).write(0x40, 7);
    settle();
    bench.memory.refuses = [](const tlm::tlm_generic_payload& payload) { return payload.is_write(); };
    CHECK(bench.cpu(1).read(0x40) == 7);
    CHECK(bench.cpu(1).status == tlm::TLM_OK_RESPONSE);  // it belongs to no access
    settle();
    CHECK(sc_core::sc_report_handler::get_count(memory_id, sc_core::SC_ERROR) == 1);
    CHECK(bench.bus->totals().block_writes == 0);

    bench.memory.refuses = [](const tlm::tlm_generic_payload&) { return false; };
    bench.cpu(0).write(0x80, 8);
    CHECK(bench.cpu(1).read(0x80) == 8);
    settle();
    CHECK(bench.bus->totals().block_writes == 1);
    CHECK(bench.broken_laws() == "");
  });
}
