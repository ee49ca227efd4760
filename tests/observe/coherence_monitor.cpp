// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/observe/coherence_monitor.h"

#include <catch2/catch.hpp>
#include <cstring>

using namespace earshot;

namespace {

State state(const char* name, bool readable, bool writable = false, bool owner = false) {
  State s;
  s.name = name;
  s.readable = readable;
  s.writable = writable;
  s.owner = owner;
  return s;
}

const State gone = state("I", false);
const State clean = state("V", true);
const State dirty = state("D", true, false, true);
const State alone = state("M", true, true, true);

// A monitor over a memory of zeros that a test may change.
struct Watched {
  std::vector<std::uint8_t> memory = std::vector<std::uint8_t>(256);
  CoherenceMonitor monitor{32, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
                             std::memcpy(to, &memory[address], length);
                           }};
  void access(int port, bool write, std::uint64_t address, std::uint32_t value) {
    monitor.accessed(port, write, address, reinterpret_cast<const std::uint8_t*>(&value), sizeof value);
  }
};

}  // namespace

TEST_CASE("a read of the last written value passes, whoever wrote it", "[observe]") {
  Watched w;
  w.access(0, true, 0x40, 5);
  CHECK_NOTHROW(w.access(1, false, 0x40, 5));
  CHECK_NOTHROW(w.access(1, false, 0x44, 0));  // what memory held before
  CHECK(w.monitor.accesses_checked() == 3);
}

TEST_CASE("a stale read is a violation with both values and the line's last events", "[observe]") {
  Watched w;
  w.monitor.changed(0, 0x40, gone, dirty);
  w.access(0, true, 0x40, 5);
  w.monitor.changed(1, 0x40, gone, clean);
  CHECK_THROWS_WITH(w.access(1, false, 0x40, 4),
                    "coherence violation at access 2, line 0x40: cache 1 read 0x4 at 0x40; the last value written there "
                    "is 0x5, by cache 0\n"
                    "  the line's last events:\n"
                    "    access 1: cache 0 I -> D\n"
                    "    access 1: cache 0 writes 0x5 at 0x40, 4 bytes\n"
                    "    access 2: cache 1 I -> V\n"
                    "    access 2: cache 1 reads 0x4 at 0x40, 4 bytes");
  CHECK_FALSE(w.monitor.violation().empty());
}

TEST_CASE("two owners are a violation", "[observe]") {
  Watched w;
  w.monitor.changed(0, 0x40, gone, dirty);
  w.monitor.changed(2, 0x40, gone, dirty);
  CHECK_THROWS_WITH(w.monitor.settled(0x40), Catch::Contains("the line has two owners, cache 0 and cache 2"));
}

TEST_CASE("a silently writable copy beside another is a violation", "[observe]") {
  Watched w;
  w.monitor.changed(0, 0x40, gone, alone);
  CHECK_NOTHROW(w.monitor.settled(0x40));
  w.monitor.changed(1, 0x40, gone, clean);
  CHECK_THROWS_WITH(w.monitor.settled(0x40),
                    Catch::Contains("cache 0 may write the line silently, but it is not the only copy"));
}

TEST_CASE("stale memory is a violation only if nobody owns the line", "[observe]") {
  Watched w;
  w.monitor.changed(0, 0x40, gone, dirty);
  w.access(0, true, 0x44, 0x0600);
  CHECK_NOTHROW(w.monitor.settled(0x40));
  CHECK(w.monitor.check_memory() == 1);  // still owned, so not compared
  w.monitor.changed(0, 0x40, dirty, gone);
  CHECK_THROWS_WITH(w.monitor.settled(0x40),
                    Catch::Contains("nobody owns the line, but memory is stale: at 0x45 it holds 0x0, the last value "
                                    "written is 0x6, by cache 0"));
  CHECK_THROWS_AS(w.monitor.check_memory(), CoherenceViolation);
  w.memory[0x45] = 6;
  CHECK_NOTHROW(w.monitor.settled(0x40));
  CHECK(w.monitor.check_memory() == 0);
}

TEST_CASE("a debug write changes what reads must return", "[observe]") {
  Watched w;
  w.access(0, false, 0x40, 0);
  const std::uint32_t value = 9;
  w.monitor.poked(0x40, reinterpret_cast<const std::uint8_t*>(&value), 4);
  CHECK_NOTHROW(w.access(1, false, 0x40, 9));
  CHECK_THROWS_AS(w.access(1, false, 0x40, 0), CoherenceViolation);
}

TEST_CASE("only the last events of a line are kept", "[observe]") {
  Watched w;
  for (std::uint32_t i = 0; i < 50; ++i) w.access(0, true, 0x40, i);
  try {
    w.access(1, false, 0x40, 1);
    FAIL("no violation");
  } catch (const CoherenceViolation& violation) {
    const std::string text = violation.what();
    CHECK(std::count(text.begin(), text.end(), '\n') == 13);
    CHECK(text.find("access 40: cache 0 writes 0x27") != std::string::npos);
    CHECK(text.find("access 39:") == std::string::npos);
  }
}
