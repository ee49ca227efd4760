// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A user's arbiter that answers what cannot be is reported, and nothing is granted.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

// Chooses `beyond` places behind the last contender; may be asked from `back` cycles ago on.
struct ScriptedArbiter : Arbiter {
  std::size_t beyond = 0;
  std::uint64_t back = 0;
  std::size_t choose(const std::vector<Contender>& contenders, std::uint64_t) override {
    return contenders.size() - 1 + beyond;
  }
  std::uint64_t next_cycle(const std::vector<Contender>&, std::uint64_t cycle) override { return cycle - back; }
};

// What one read through such an arbiter reports; empty if nothing.
std::string reported(std::size_t beyond, std::uint64_t back) {
  BenchOptions options;
  options.bus.make_arbiter = [=](int) {
    auto arbiter = std::make_unique<ScriptedArbiter>();
    arbiter->beyond = beyond;
    arbiter->back = back;
    return arbiter;
  };
  Bench bench(load_table("msi"), options);
  try {
    simulate([&] { bench.cpu(0).read(0x40); });
  } catch (const sc_core::sc_report& report) {
    CHECK(bench.memory.requests.empty());
    return std::string(report.get_msg_type()) + ": " + report.get_msg();
  }
  CHECK(bench.memory.requests.size() == 1);
  return "";
}

}  // namespace

// Looked up at 1 ns, asked for at 5 ns, arbitrated for a cycle of 5 ns: cycle 2.
TEST_CASE("an arbiter that chooses the last contender is no error", "[bus]") { CHECK(reported(0, 0) == ""); }
TEST_CASE("an arbiter that chooses nobody there is is reported", "[bus]") {
  CHECK(reported(1, 0) ==
        "/earshot/bus/arbiter: bus: the arbiter chose 1 of 1 contenders for cycle 2 in cycle 2");
}
TEST_CASE("an arbiter that would have been asked in the past is reported", "[bus]") {
  CHECK(reported(0, 1) ==
        "/earshot/bus/arbiter: bus: the arbiter chose 0 of 1 contenders for cycle 1 in cycle 2");
}
