// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An initiator without a cache on the bus, under every protocol and in both timings, the monitor watching.
#include "earshot/bus/io_port.h"

#include <catch2/catch.hpp>
#include <random>

#include "earshot/traffic/non_blocking_player.h"
#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

SystemOptions with_device(BusTiming timing, int caches = 2) {
  SystemOptions options;
  options.caches = caches;
  options.io_ports = 1;
  options.bus.timing = timing;
  return options;
}

// One simulation a process: each protocol, both timings, has a case of its own.
#define FOR_EVERY_PROTOCOL(claim, body)                                                          \
  FOR_TIMING(claim, body, write_through_update, "write-through-update")                          \
  FOR_TIMING(claim, body, dirty_owner_update, "dirty-owner-update")                              \
  FOR_TIMING(claim, body, dragon, "dragon")                                                      \
  FOR_TIMING(claim, body, firefly, "firefly")                                                    \
  FOR_TIMING(claim, body, competitive_update, "competitive-update")                              \
  FOR_TIMING(claim, body, msi, "msi")                                                            \
  FOR_TIMING(claim, body, mesi, "mesi")                                                          \
  FOR_TIMING(claim, body, moesi, "moesi")                                                        \
  FOR_TIMING(claim, body, berkeley, "berkeley")                                                  \
  FOR_TIMING(claim, body, write_once, "write-once")
#define FOR_TIMING(claim, body, id, protocol)                                                           \
  TEST_CASE(claim ": " protocol ", annotated", "[bus]") { body(protocol, BusTiming::annotated); }       \
  TEST_CASE(claim ": " protocol ", arbitrated", "[bus]") { body(protocol, BusTiming::arbitrated); }

// Bytes that are different everywhere.
std::vector<std::uint8_t> bytes_from(unsigned first, unsigned count) {
  std::vector<std::uint8_t> bytes(count);
  for (unsigned i = 0; i < count; ++i) bytes[i] = static_cast<std::uint8_t>(first + i);
  return bytes;
}

void device_reads_dirty_bytes(const std::string& protocol, BusTiming timing) {
  System system(load_table(protocol), with_device(timing));
  simulate([&] {
    for (std::uint32_t word = 0; word < 8; ++word) system.cpu(0).write(0x100 + 4 * word, 0x1000 + word);
    system.cpu(1).read(0x104);
    const std::string states = system.states(0x100);
    const std::uint64_t fetched = system.bus->totals().block_reads;
    for (std::uint32_t word = 0; word < 8; ++word) CHECK(system.device(0).read(0x100 + 4 * word) == 0x1000 + word);
    CHECK(system.device(0).status == tlm::TLM_OK_RESPONSE);
    CHECK(system.states(0x100) == states);
    CHECK(system.bus->totals().block_reads == fetched);
    CHECK(system.count(BusKind::io_read) == 8);
  });
  CHECK(system.io_ports[0]->totals().reads == 8);
  CHECK(system.io_ports[0]->totals().latency.sum() == system.io_ports[0]->totals().parts.total());
}

void device_writes_into_a_dirty_line(const std::string& protocol, BusTiming timing) {
  const Table table = load_table(protocol);
  System system(table, with_device(timing));
  simulate([&] {
    for (std::uint32_t word = 0; word < 8; ++word) system.cpu(0).write(0x100 + 4 * word, 0x1000 + word);
    system.device(0).write(0x108, 0xabcd);
    CHECK(system.device(0).status == tlm::TLM_OK_RESPONSE);
    if (table.family() == Family::update)
      CHECK(system.cache(0).state_of(0x100) != table.state(absent).name);
    else
      CHECK(system.cache(0).state_of(0x100) == table.state(absent).name);
    for (std::uint32_t word = 0; word < 8; ++word) {
      const std::uint32_t expected = word == 2 ? 0xabcd : 0x1000 + word;
      CHECK(system.cpu(word % 2).read(0x100 + 4 * word) == expected);
      CHECK(system.device(0).debug_read(0x100 + 4 * word) == expected);
    }
    sc_core::sc_time delay;
    for (int i = 0; i < 2; ++i) CHECK(system.cache(i).flush(delay) == 0);
    for (std::uint32_t word = 0; word < 8; ++word)
      CHECK(system.in_memory(0x100 + 4 * word) == (word == 2 ? 0xabcd : 0x1000 + word));
  });
  CHECK(system.monitor->check_memory() == 0);
}

void bursts_and_byte_enables(const std::string& protocol, BusTiming timing) {
  System system(load_table(protocol), with_device(timing));
  simulate([&] {
    system.cpu(0).write(0x11c, 0x44332211);
    system.cpu(1).write(0x140, 0x88776655);
    std::vector<std::uint8_t> data = bytes_from(1, 72);  // ends and begins in the middle of a line
    CHECK(system.device(0).transport(tlm::TLM_WRITE_COMMAND, 0x11e, data.data(), 72) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(1).read(0x11c) == 0x02012211);
    CHECK(system.cpu(0).read(0x120) == 0x06050403);
    CHECK(system.cpu(0).read(0x140) == 0x26252423);
    CHECK(system.cpu(0).read(0x162) == 0x48474645);
    std::vector<std::uint8_t> enabled(8, TLM_BYTE_DISABLED), word = bytes_from(0xa0, 8);
    enabled[1] = enabled[6] = TLM_BYTE_ENABLED;
    CHECK(system.device(0).transport(tlm::TLM_WRITE_COMMAND, 0x120, word.data(), 8, 8, enabled) == tlm::TLM_OK_RESPONSE);
    CHECK(system.cpu(0).read(0x120) == 0x0605a103);
    CHECK(system.cpu(1).read(0x124) == 0x0aa60807);
    std::vector<std::uint8_t> got(8, 0xee);
    CHECK(system.device(0).transport(tlm::TLM_READ_COMMAND, 0x120, got.data(), 8, 8, enabled) == tlm::TLM_OK_RESPONSE);
    CHECK(got == std::vector<std::uint8_t>{0xee, 0xa1, 0xee, 0xee, 0xee, 0xee, 0xa6, 0xee});
  });
}

// Three processors and a device on a few lines that two-line caches cannot hold; the monitor judges every value.
void races(const std::string& protocol, BusTiming timing) {
  SystemOptions options = with_device(timing, 3);
  options.geometry = {64, 1, 32, Replacement::lru, 1};
  System system(load_table(protocol), options);
  int playing = 4;
  std::exception_ptr error;
  const auto play = [&](Driver& driver, unsigned seed) {
    std::mt19937 random(seed);
    try {
      for (int i = 0; i < 1500; ++i) {
        const std::uint64_t address = 4 * (random() % 40);  // five lines
        if (random() % 3 == 0)
          driver.write(address, static_cast<std::uint32_t>(random()));
        else
          driver.read(address);
        if (driver.status != tlm::TLM_OK_RESPONSE) throw std::runtime_error("an access was refused");
        sc_core::wait(from_ps(1000 * (random() % 60)));
      }
    } catch (...) {
      error = std::current_exception();
    }
    if (--playing == 0 || error != nullptr) sc_core::sc_stop();
  };
  for (int i = 0; i < 3; ++i) sc_core::sc_spawn([&, i] { play(system.cpu(i), 7 + static_cast<unsigned>(i)); });
  sc_core::sc_spawn([&] { play(system.device(0), 99); });
  sc_core::sc_start();
  if (error) std::rethrow_exception(error);
  CHECK(playing == 0);
  CHECK(system.monitor->accesses_checked() >= 6000);
  system.monitor->check_memory();
  CHECK(system.bus->broken_laws().empty());
}

}  // namespace

FOR_EVERY_PROTOCOL("an I/O port reads what the owner has and disturbs no copy", device_reads_dirty_bytes)
FOR_EVERY_PROTOCOL("an I/O write reaches or ends every copy and loses no other byte", device_writes_into_a_dirty_line)
FOR_EVERY_PROTOCOL("an I/O port's bursts cross lines, and byte enables are honoured", bursts_and_byte_enables)
FOR_EVERY_PROTOCOL("caches and an I/O port race for a few lines", races)

TEST_CASE("an I/O write of a whole line needs nothing of its dirty owner", "[bus]") {
  System system(load_table("mesi"), with_device(BusTiming::annotated));
  simulate([&] {
    system.cpu(0).write(0x100, 1);
    std::vector<std::uint8_t> line = bytes_from(0, 32);
    system.device(0).transport(tlm::TLM_WRITE_COMMAND, 0x100, line.data(), 32);
    CHECK(system.cpu(1).read(0x100) == 0x03020100);
  });
  CHECK(system.io_ports[0]->totals().parts[LatencyPart::owner_supply] == 0);
  CHECK(system.bus->totals().block_writes == 1);
}

TEST_CASE("an I/O port of nb_transport keeps the four phases", "[bus]") {
  struct Sweep : AccessSource {
    std::uint64_t at = 0;
    bool next(Access& access) override {
      access = Access{};
      access.op = at % 8 == 0 ? AccessOp::write : AccessOp::read;
      access.address = at;
      access.size = 4;
      at += 4;
      return at <= 0x400;
    }
  };
  SystemOptions options;
  options.bus.timing = BusTiming::arbitrated;
  System system(load_table("dirty-owner-update"), options);
  IoPort port("port");
  PlayerHooks hooks;
  hooks.finished = [] { sc_core::sc_stop(); };
  NonBlockingPlayer player("player", 0, 4, sc_core::SC_ZERO_TIME, hooks);
  player.set_source(std::make_unique<Sweep>());
  player.initiator_socket.bind(port.io_socket);
  port.bus_socket.bind(system.bus->cache_socket);
  port.set_observer(system.monitor.get());
  sc_core::sc_start();
  CHECK(player.end().finished);
  CHECK(port.totals().reads == 128);
  CHECK(port.totals().writes == 128);
}

TEST_CASE("a streaming width of 0 means the data length, and is remarked on once", "[bus]") {
  SystemOptions options = with_device(BusTiming::annotated);
  options.windows = {{"memory", 0, 0x1000, true, 0}, {"registers", 0x1000, 0x1000, false, 0, 2}};
  System system(load_table("dirty-owner-update"), options);
  static int remarks = 0;
  sc_core::sc_report_handler::set_handler([](const sc_core::sc_report& report, const sc_core::sc_actions& actions) {
    if (report.get_severity() == sc_core::SC_INFO)
      remarks += std::string(report.get_msg_type()) == "/earshot/oddity";
    else
      sc_core::sc_report_handler::default_handler(report, actions);
  });
  simulate([&] {
    std::uint32_t value = 0x12345678;
    auto* const bytes = reinterpret_cast<std::uint8_t*>(&value);
    for (Driver* driver : {&system.cpu(0), &system.device(0)}) {
      for (int i = 0; i < 2; ++i) {
        CHECK(driver->transport(tlm::TLM_WRITE_COMMAND, 0x200, bytes, 4, 0) == tlm::TLM_OK_RESPONSE);
        CHECK(driver->transport(tlm::TLM_READ_COMMAND, 0x200, bytes, 4, 0) == tlm::TLM_OK_RESPONSE);
      }
      CHECK(value == 0x12345678);
      CHECK(driver->transport(tlm::TLM_WRITE_COMMAND, 0x1000, bytes, 4, 0) == tlm::TLM_OK_RESPONSE);
      value = 0;
      CHECK(driver->transport(tlm::TLM_READ_COMMAND, 0x1000, bytes, 4, 0) == tlm::TLM_OK_RESPONSE);
      CHECK(value == 0x12345678);
    }
  });
  CHECK(remarks == 2);
}

TEST_CASE("a device is told of addresses nobody answers, and of no data", "[bus]") {
  SystemOptions options = with_device(BusTiming::annotated);
  options.windows = {{"memory", 0, 0x1000, true, 0}, {"registers", 0x1000, 0x1000, false, 0}};
  System system(load_table("mesi"), options);
  simulate([&] {
    Driver& device = system.device(0);
    std::uint32_t value = 7;
    auto* const bytes = reinterpret_cast<std::uint8_t*>(&value);
    CHECK(device.transport(tlm::TLM_READ_COMMAND, 0x2000, bytes, 4) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(device.transport(tlm::TLM_READ_COMMAND, 0xffe, bytes, 4) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(device.transport(tlm::TLM_READ_COMMAND, 0x100, nullptr, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(device.transport(tlm::TLM_WRITE_COMMAND, 0x1000, bytes, 4) == tlm::TLM_OK_RESPONSE);
    CHECK(device.read(0x1000) == 7);
  });
  CHECK(system.io_ports[0]->totals().errors == 3);
  CHECK(system.io_ports[0]->totals().uncached == 2);
}

TEST_CASE("a bus with nothing but I/O ports is refused", "[bus]") {
  SystemOptions options = with_device(BusTiming::annotated, 0);
  options.watched = false;
  System system(load_table("mesi"), options);
  CHECK_THROWS_WITH(sc_core::sc_start(sc_core::SC_ZERO_TIME), Catch::Contains("only I/O ports are bound"));
}

TEST_CASE("a protocol that does not know I/O ports is refused beside one", "[bus]") {
  const Table table = Table::parse(
      "protocol p\nfamily invalidate\nstate I absent\nstate S readable\nI read | bus read | S\n"
      "I write | bus write-through | I\nS write | bus write-through | S\n"
      "S snoop-read | | S\nS snoop-write-through | | I\n",
      "p");
  System system(table, with_device(BusTiming::annotated));
  CHECK_THROWS_WITH(sc_core::sc_start(sc_core::SC_ZERO_TIME), Catch::Contains("no rows for snoop-io-read"));
}
