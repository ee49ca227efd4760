// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Targets that take a few bytes at a time, refuse their last byte, ignore byte enables, set no response
// status or overwrite the payload, behind a bus of either timing.
#include <catch2/catch.hpp>

#include "bus/awkward.h"

using namespace earshot;
using namespace earshot::test;

namespace {

using Payload = tlm::tlm_generic_payload;

}  // namespace

// ---- max_burst

TEST_CASE(
    "lines longer than a window's max_burst are several accesses, in address order, all their time counted",
    "[bus]") {
  Bed annotated("annotated", BusTiming::annotated, "msi", 0, false);
  Bed annotated_8("annotated_8", BusTiming::annotated, "msi", 8, false);
  Bed arbitrated("arbitrated", BusTiming::arbitrated, "msi", 0, false);
  Bed arbitrated_8("arbitrated_8", BusTiming::arbitrated, "msi", 8, false);
  simulate([&] {
    for (auto [whole, pieces] :
         {std::pair<Bed*, Bed*>{&annotated, &annotated_8}, {&arbitrated, &arbitrated_8}}) {
      INFO(pieces->name());
      std::array<Picoseconds, 2> fill{}, flush{};
      for (std::size_t i = 0; i < 2; ++i) {
        Bed& bed = i == 0 ? *whole : *pieces;
        std::uint32_t value = 0;
        for (std::uint32_t at = 0; at < 32; ++at)
          bed.ram.bytes.write(0x40 + at, reinterpret_cast<std::uint8_t*>(&at), 1);
        fill[i] = bed.read(0x44, value);
        CHECK(value == 0x07060504);
        CHECK(bed.read(0x5c) == 0x1f1e1d1c);
        CHECK(bed.ram.places() == (i == 0 ? "0x40+32" : "0x40+8 0x48+8 0x50+8 0x58+8"));
        CHECK(bed.ram.in_turn());
        settle();
        bed.ram.seen.clear();
        bed.write(0x50, 0xabcd);
        settle();
        bed.ram.seen.clear();
        const Picoseconds begin = now_ps();
        bed.flush();
        flush[i] = now_ps() - begin;
        CHECK(bed.ram.places() == (i == 0 ? "0x40+32" : "0x40+8 0x48+8 0x50+8 0x58+8"));
        CHECK(bed.ram.in_turn());
        CHECK(Bed::word(bed.ram, 0x50) == 0xabcd);
        settle();
        bed.check();
      }
      CHECK(fill[1] - fill[0] == 3 * ps(60));
      CHECK(flush[1] - flush[0] == 3 * ps(60));
      CHECK(whole->bus.totals().block_reads == pieces->bus.totals().block_reads);
    }
  });
}

TEST_CASE("the first piece that a target refuses is the answer, the window is named, and nothing is cached",
          "[bus]") {
  Beds beds("msi", 8);
  beds.each([](Bed& bed) {
    bed.ram.refuses = [](const Payload& payload) { return payload.get_address() == 0x50; };
    bed.ram.overwrites = true;
    bed.read(0x40);
    CHECK(bed.cpu.status == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(bed.ram.places() == "0x40+8 0x48+8 0x50+8");
    CHECK(bed.cache->state_of(0x40) == "I");
    bed.read(0x40);
    CHECK(bed.cpu.status == tlm::TLM_BURST_ERROR_RESPONSE);
    bed.ram.refuses = [](const Payload&) { return false; };
    bed.write(0x40, 0x1234);
    CHECK(bed.cpu.status == tlm::TLM_OK_RESPONSE);
    CHECK(bed.read(0x40) == 0x1234);
  });
  Beds::check_warnings("ram",
                       "does not do a read of 8 bytes at 0x50, its address (TLM_BURST_ERROR_RESPONSE)");
}

TEST_CASE("a target that takes four bytes at a time works with a max_burst of four", "[bus]") {
  Beds beds("msi", 4);
  beds.each([](Bed& bed) {
    bed.ram.refuses = [](const Payload& payload) { return payload.get_data_length() > 4; };
    bed.write(0x44, 0x1234);
    CHECK(bed.cpu.status == tlm::TLM_OK_RESPONSE);
    bed.flush();
    CHECK(Bed::word(bed.ram, 0x44) == 0x1234);
  });
  CHECK(Beds::warnings().empty());
}

TEST_CASE("a target that takes four bytes at a time is named if its window has no max_burst", "[bus]") {
  Beds beds("msi");
  beds.each([&](Bed& bed) {
    bed.ram.refuses = [](const Payload& payload) { return payload.get_data_length() > 4; };
    bed.read(0x44);
    CHECK(bed.cpu.status == tlm::TLM_BURST_ERROR_RESPONSE);
    bed.read(0x84);
  });
  Beds::check_warnings("ram", "does not do a read of 32 bytes at 0x40, its address");
  Beds::check_warnings("ram", "if it takes fewer bytes at a time, set Window::max_burst");
}

TEST_CASE("a target that refuses what ends at its last byte: its last line is an error, all others work",
          "[bus]") {
  Beds beds("msi", 4);
  beds.each([](Bed& bed) {
    bed.ram.refuses = [](const Payload& payload) {
      return payload.get_address() + payload.get_data_length() >= 0x1000;
    };
    bed.read(0xfe0);
    CHECK(bed.cpu.status == tlm::TLM_BURST_ERROR_RESPONSE);  // the line has bytes that nobody can have
    CHECK(bed.ram.seen.back().address == 0xffc);
    CHECK(bed.cache->state_of(0xfe0) == "I");
    bed.write(0xfdc, 5);
    CHECK(bed.cpu.status == tlm::TLM_OK_RESPONSE);
    bed.flush();
    CHECK(Bed::word(bed.ram, 0xfdc) == 5);
  });
  Beds::check_warnings("ram", "does not do a read of 4 bytes at 0xffc, its address");
}

TEST_CASE("an uncached access is cut at the multiples of max_burst in its target's addresses", "[bus]") {
  Beds beds("msi", 4);
  beds.each([](Bed& bed) {
    std::array<std::uint8_t, 10> data{0, 1, 2, 3, 4, 5, 6, 7, 8, 9};
    const Picoseconds begin = now_ps();
    CHECK(bed.cpu.transport(tlm::TLM_WRITE_COMMAND, device_base + 1, data.data(), 10, 10,
                            {TLM_BYTE_ENABLED, TLM_BYTE_DISABLED, TLM_BYTE_ENABLED}) == tlm::TLM_OK_RESPONSE);
    sc_core::wait(bed.cpu.delay);
    CHECK(now_ps() - begin >= 3 * ps(60));
    CHECK(bed.device.places() == "0x102+2 0x104+4 0x108+4");
    CHECK(bed.device.in_turn());
    using Enables = std::vector<std::uint8_t>;
    CHECK(bed.device.seen[0].enables == Enables{0xff, 0});
    CHECK(bed.device.seen[1].enables == Enables{0xff, 0xff, 0, 0xff});
    CHECK(bed.device.seen[2].enables == Enables{0xff, 0, 0xff, 0xff});

    std::array<std::uint8_t, 10> back{};
    CHECK(bed.cpu.transport(tlm::TLM_READ_COMMAND, device_base + 1, back.data(), 10) == tlm::TLM_OK_RESPONSE);
    CHECK(back == data);  // this target ignores byte enables

    settle();
    bed.device.seen.clear();
    CHECK(bed.cpu.transport(tlm::TLM_WRITE_COMMAND, device_base + 3, data.data(), 6, 2) ==
          tlm::TLM_OK_RESPONSE);
    CHECK(bed.device.places() == "0x104+2 0x104+2 0x104+2");  // streams

    settle();
    bed.device.seen.clear();
    bed.device.refuses = [](const Payload& payload) { return payload.get_address() == 0x104; };
    CHECK(bed.cpu.transport(tlm::TLM_READ_COMMAND, device_base + 1, back.data(), 10) ==
          tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(bed.device.places() == "0x102+2 0x104+4");
  });
  CHECK(Beds::warnings().empty());  // a device may refuse
}

TEST_CASE("pieces reach a target that answers on the return path, or by calls of its own", "[bus]") {
  Beds beds("msi", 8);
  simulate([&] {
    Bed& bed = beds.arbitrated;
    Picoseconds took = 0;
    for (const auto manner : {Awkward::Manner::completes, Awkward::Manner::updates, Awkward::Manner::calls}) {
      bed.ram.manner = bed.device.manner = manner;
      bed.ram.seen.clear();
      settle();
      std::uint32_t value = 0;
      const Picoseconds now = bed.read(0x40 + 0x80 * static_cast<unsigned>(manner), value);
      CHECK(bed.ram.seen.size() == 4);
      CHECK(bed.ram.in_turn());
      if (took != 0) CHECK(now == took);
      took = now;
      std::array<std::uint8_t, 20> data{};
      CHECK(bed.cpu.transport(tlm::TLM_READ_COMMAND, device_base, data.data(), 20) == tlm::TLM_OK_RESPONSE);
    }
    settle();
    bed.check();
    for (const BrokenRule& rule : bed.ram_hop.rules().broken()) FAIL_CHECK(rule.text);
  });
}

// ---- Byte enables

TEST_CASE("a written word reaches memory as the runs of its enabled bytes, without byte enables", "[bus]") {
  Beds beds("write-through-update");
  beds.each([](Bed& bed) {
    std::array<std::uint8_t, 8> data{1, 2, 3, 4, 5, 6, 7, 8};
    const std::uint8_t on = TLM_BYTE_ENABLED, off = TLM_BYTE_DISABLED;
    CHECK(bed.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x40, data.data(), 8, 8,
                            {off, on, on, off, off, off, on, off}) == tlm::TLM_OK_RESPONSE);
    settle();
    std::vector<Awkward::Seen> writes;
    for (const Awkward::Seen& one : bed.ram.seen)
      if (one.write) writes.push_back(one);
    REQUIRE(writes.size() == 2);
    CHECK((writes[0].address == 0x41 && writes[0].length == 2));
    CHECK((writes[1].address == 0x46 && writes[1].length == 1));
    CHECK((writes[0].enables.empty() && writes[1].enables.empty()));
    CHECK(Bed::word(bed.ram, 0x40) == 0x00030200);
    CHECK(Bed::word(bed.ram, 0x44) == 0x00070000);
    CHECK(bed.bus.totals().word_writes == 1);
    CHECK(bed.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x40, data.data(), 4, 4, {off}) == tlm::TLM_OK_RESPONSE);
    CHECK(Bed::word(bed.ram, 0x40) == 0x00030200);
  });
}

// ---- No response status

namespace {

tlm::tlm_response_status answer_to(Bed& bed, std::uint64_t address, tlm::tlm_response_status preset) {
  std::uint32_t value = 0;
  Payload payload;
  payload.set_command(tlm::TLM_READ_COMMAND);
  payload.set_address(address);
  payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
  payload.set_data_length(4);
  payload.set_streaming_width(4);
  payload.set_response_status(preset);
  sc_core::sc_time delay;
  bed.cpu.socket->b_transport(payload, delay);
  sc_core::wait(delay);
  return payload.get_response_status();
}

}  // namespace

TEST_CASE("no response status is an error, whatever the initiator had set, and is told once a window",
          "[bus]") {
  Beds beds("msi");
  beds.each([](Bed& bed) {
    bed.device.sets_status = false;
    for (const auto preset : {tlm::TLM_OK_RESPONSE, tlm::TLM_INCOMPLETE_RESPONSE})
      CHECK(answer_to(bed, device_base, preset) == tlm::TLM_INCOMPLETE_RESPONSE);
  });
  Beds::check_warnings("device", "sets no response status");
  Beds::check_warnings("device", "set Window::no_status_is_ok");
}

TEST_CASE("no response status is an error to who reads memory, too", "[bus]") {
  Beds beds("msi");
  beds.each([](Bed& bed) {
    bed.ram.sets_status = false;
    for (const auto preset : {tlm::TLM_OK_RESPONSE, tlm::TLM_INCOMPLETE_RESPONSE})
      CHECK(answer_to(bed, 0x40, preset) == tlm::TLM_INCOMPLETE_RESPONSE);
    CHECK(bed.cache->state_of(0x40) == "I");
  });
  Beds::check_warnings("ram", "set Window::no_status_is_ok");
}

TEST_CASE("no response status means success where the window says so; an error stays one", "[bus]") {
  Beds beds("msi", 16, true);
  beds.each([](Bed& bed) {
    bed.device.sets_status = bed.ram.sets_status = false;
    for (const auto preset : {tlm::TLM_OK_RESPONSE, tlm::TLM_INCOMPLETE_RESPONSE})
      CHECK(answer_to(bed, device_base, preset) == tlm::TLM_OK_RESPONSE);
    bed.write(0x40, 0x1234);
    bed.flush();
    CHECK(bed.read(0x40) == 0x1234);
    CHECK(bed.cpu.status == tlm::TLM_OK_RESPONSE);
    bed.device.refuses = [](const Payload&) { return true; };
    CHECK(answer_to(bed, device_base, tlm::TLM_OK_RESPONSE) == tlm::TLM_BURST_ERROR_RESPONSE);
  });
  CHECK(Beds::warnings().empty());
}

// ---- Targets that write to the payload

TEST_CASE("what a target overwrites in the payload is not read back, and the caller has it as it was",
          "[bus]") {
  Beds beds("msi", 8);
  beds.each([](Bed& bed) {
    bed.ram.overwrites = bed.device.overwrites = true;
    bed.write(0x44, 0x1234);
    CHECK(bed.cpu.status == tlm::TLM_OK_RESPONSE);
    bed.flush();
    CHECK(Bed::word(bed.ram, 0x44) == 0x1234);
    CHECK(bed.read(0x44) == 0x1234);

    std::array<std::uint8_t, 12> data{}, enables{};
    enables.fill(TLM_BYTE_ENABLED);
    for (const unsigned length : {4u, 12u}) {  // whole, in pieces
      Payload payload;
      const auto said = [&] {
        CHECK(payload.get_command() == tlm::TLM_WRITE_COMMAND);
        CHECK(payload.get_address() == device_base + 8);
        CHECK(payload.get_data_ptr() == data.data());
        CHECK(payload.get_data_length() == length);
        CHECK(payload.get_streaming_width() == length);
        CHECK(payload.get_byte_enable_ptr() == enables.data());
        CHECK(payload.get_byte_enable_length() == length);
      };
      payload.set_command(tlm::TLM_WRITE_COMMAND);
      payload.set_address(device_base + 8);
      payload.set_data_ptr(data.data());
      payload.set_data_length(length);
      payload.set_streaming_width(length);
      payload.set_byte_enable_ptr(enables.data());
      payload.set_byte_enable_length(length);
      sc_core::sc_time delay;
      bed.cpu.socket->b_transport(payload, delay);
      sc_core::wait(delay);
      CHECK(payload.is_response_ok());
      said();
      tlm::tlm_dmi dmi;
      bed.cpu.socket->get_direct_mem_ptr(payload, dmi);
      CHECK(dmi.get_start_address() == device_base + 8);
      said();
      payload.set_byte_enable_ptr(enables.data());
      CHECK(bed.cpu.socket->transport_dbg(payload) == length);
      said();
    }
    CHECK(bed.device.places() == "0x109+4 0x109+7 0x110+5");
    std::uint32_t value = 0x5678;
    CHECK(bed.cpu.debug(tlm::TLM_WRITE_COMMAND, 0x44, reinterpret_cast<std::uint8_t*>(&value), 4) == 4);
    CHECK(bed.read(0x44) == 0x5678);  // the copy, too
    CHECK(Bed::word(bed.ram, 0x44) == 0x5678);
  });
}

TEST_CASE("a caller has its payload as it was also if its process is killed while the target waits",
          "[bus]") {
  struct Waits : sc_core::sc_module {
    tlm_utils::simple_target_socket<Waits> target_socket{"target_socket"};
    explicit Waits(sc_core::sc_module_name name) : sc_module(name) {
      target_socket.register_b_transport(this, &Waits::b_transport);
    }
    void b_transport(Payload& payload, sc_core::sc_time&) {
      payload.set_address(0x7770777);
      sc_core::wait(ns(100));
    }
  } device("device");
  SnoopingBusConfig config;
  config.windows = {{"device", 0x1000, 0x1000, false, 0}};
  SnoopingBus bus("bus", config);
  InvalidatingCache cache("cache", Bed::cache_config("msi"));
  Driver cpu("cpu");
  bus.window_socket("device").bind(device.target_socket);
  cache.bus_socket.bind(bus.cache_socket);
  cpu.socket.bind(cache.cpu_socket);
  simulate([&] {
    std::uint32_t value = 0;
    Payload payload;
    payload.set_command(tlm::TLM_READ_COMMAND);
    payload.set_address(0x1004);
    payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
    payload.set_data_length(4);
    payload.set_streaming_width(4);
    sc_core::sc_process_handle caller = sc_core::sc_spawn([&] {
      sc_core::sc_time delay;
      cpu.socket->b_transport(payload, delay);
    });
    sc_core::wait(ns(50));
    CHECK(payload.get_address() == 0x7770777);
    caller.kill();
    CHECK(payload.get_address() == 0x1004);
  });
}

TEST_CASE("a target that answers OK to less than it was asked for has not filled the line", "[bus]") {
  Beds beds("msi");
  beds.each([](Bed& bed) {
    bed.ram.shortens = bed.device.shortens = true;
    bed.read(0x40);
    CHECK(bed.cpu.status == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(bed.cache->state_of(0x40) == "I");
  });
  Beds::check_warnings("ram", "does not do a read of 32 bytes at 0x40");
}
