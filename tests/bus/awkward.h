// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A bed of one cache and one bus, of either timing, before targets that do what real ones do: refuse, set no
// response status, overwrite the payload. An observer of the base protocol is on the hop to each.
#pragma once

#include <catch2/catch.hpp>

#include "arbitrated.h"
#include "earshot/timing/kernel.h"
#include "tlm/base_protocol_observer.h"

namespace earshot::test {

constexpr std::uint64_t device_base = 0x10000, device_target = 0x101;

class Awkward : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  using Payload = tlm::tlm_generic_payload;
  tlm::tlm_target_socket<> socket{"socket"};
  explicit Awkward(sc_core::sc_module_name name) : sc_module(name) {
    socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
    EARSHOT_HAS_PROCESS(Awkward);
    SC_METHOD(respond);
    sensitive << due_;
    dont_initialize();
  }

  struct Seen {
    bool write;
    std::uint64_t address;
    unsigned length;
    Picoseconds begin, end;
    std::vector<std::uint8_t> enables;
    bool fresh;  // its status was TLM_INCOMPLETE_RESPONSE, its width its length
  };
  std::vector<Seen> seen;
  SparseBytes bytes;
  std::function<bool(const Payload&)> refuses = [](const Payload&) { return false; };
  bool sets_status = true, overwrites = false, shortens = false;
  enum class Manner { completes, updates, calls } manner = Manner::completes;

  // "0x40+8 0x48+8"
  std::string places() const {
    std::ostringstream text;
    for (const Seen& one : seen)
      text << (&one == &seen.front() ? "" : " ") << std::hex << "0x" << one.address << std::dec << '+'
           << one.length;
    return text.str();
  }
  bool in_turn() const {
    for (std::size_t i = 1; i < seen.size(); ++i)
      if (seen[i].begin != seen[i - 1].end) return false;
    return true;
  }

 private:
  void take(Payload& payload, sc_core::sc_time& delay) {
    const unsigned length = payload.get_data_length();
    const Picoseconds begin = now_ps() + to_ps(delay);
    delay += ns(60);
    std::uint8_t* const enable = payload.get_byte_enable_ptr();
    seen.push_back({payload.is_write(), payload.get_address(), length, begin, begin + ps(60),
                    enable == nullptr
                        ? std::vector<std::uint8_t>{}
                        : std::vector<std::uint8_t>(enable, enable + payload.get_byte_enable_length()),
                    payload.get_response_status() == tlm::TLM_INCOMPLETE_RESPONSE});
    if (refuses(payload)) {
      if (overwrites) overwrite(payload);
      payload.set_response_status(tlm::TLM_BURST_ERROR_RESPONSE);
      return;
    }
    if (payload.is_write())
      bytes.write(payload.get_address(), payload.get_data_ptr(), length);
    else
      bytes.read(payload.get_address(), payload.get_data_ptr(), length);
    if (sets_status) payload.set_response_status(tlm::TLM_OK_RESPONSE);
    if (overwrites) overwrite(payload);
    if (shortens) payload.set_data_length(length / 2);
  }
  static void overwrite(Payload& payload) {
    payload.set_address(0x7770777);
    payload.set_command(tlm::TLM_IGNORE_COMMAND);
    payload.set_data_length(payload.get_data_length() + 1);
    payload.set_data_ptr(nullptr);
    payload.set_streaming_width(1);
    payload.set_byte_enable_ptr(nullptr);
    payload.set_byte_enable_length(17);
  }
  void b_transport(Payload& payload, sc_core::sc_time& delay) override { take(payload, delay); }
  tlm::tlm_sync_enum nb_transport_fw(Payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    if (phase == tlm::END_RESP) return tlm::TLM_COMPLETED;
    const sc_core::sc_time sent = time;
    take(payload, time);
    if (manner == Manner::completes) return tlm::TLM_COMPLETED;
    phase = manner == Manner::updates ? tlm::BEGIN_RESP : tlm::END_REQ;
    if (manner == Manner::calls) {
      payload.acquire();
      held_ = &payload;
      due_.notify(time);
      time = sent;
    }
    return tlm::TLM_UPDATED;
  }
  void respond() {
    tlm::tlm_phase phase = tlm::BEGIN_RESP;
    sc_core::sc_time time;
    socket->nb_transport_bw(*held_, phase, time);
    held_->release();
  }
  bool get_direct_mem_ptr(Payload& payload, tlm::tlm_dmi& dmi) override {
    dmi.set_start_address(payload.get_address());
    dmi.set_end_address(payload.get_address());
    if (overwrites) overwrite(payload);
    return false;
  }
  unsigned transport_dbg(Payload& payload) override {
    if (payload.is_write())
      bytes.write(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    else
      bytes.read(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    const unsigned length = payload.get_data_length();
    if (overwrites) overwrite(payload);
    return length;
  }

  Payload* held_ = nullptr;
  sc_core::sc_event due_;
};

// One cache on a bus, with a cached window "ram" and an uncached one "device".
struct Bed : sc_core::sc_module {
  Bed(sc_core::sc_module_name name, BusTiming timing, const char* protocol, unsigned max_burst,
      bool no_status_is_ok)
      : sc_module(name), bus("bus", bus_config(timing, max_burst, no_status_is_ok)) {
    const CacheConfig config = cache_config(protocol);
    if (config.table->family() == Family::update)
      cache = std::make_unique<UpdatingCache>("cache", config);
    else
      cache = std::make_unique<InvalidatingCache>("cache", config);
    bus.window_socket("ram").bind(ram_hop.target_socket);
    ram_hop.initiator_socket.bind(ram.socket);
    bus.window_socket("device").bind(device_hop.target_socket);
    device_hop.initiator_socket.bind(device.socket);
    cache->bus_socket.bind(bus.cache_socket);
    cpu.socket.bind(cache->cpu_socket);
  }
  static SnoopingBusConfig bus_config(BusTiming timing, unsigned max_burst, bool no_status_is_ok) {
    SnoopingBusConfig config;
    config.timing = timing;
    config.windows = {{"ram", 0, 0x1000, true, 0, max_burst, no_status_is_ok},
                      {"device", device_base, 0x1000, false, device_target, max_burst, no_status_is_ok}};
    return config;
  }
  static CacheConfig cache_config(const char* protocol) {
    CacheConfig config;
    config.geometry = {64, 1, 32, Replacement::lru, 1};
    config.table = std::make_shared<const Table>(load_table(protocol));
    return config;
  }

  // Reads or writes, then lets the time pass; returns what it took.
  Picoseconds read(std::uint64_t address, std::uint32_t& value) {
    const Picoseconds begin = now_ps();
    value = cpu.read(address);
    sc_core::wait(cpu.delay);
    return now_ps() - begin;
  }
  std::uint32_t read(std::uint64_t address) {
    std::uint32_t value = 0;
    read(address, value);
    return value;
  }
  void write(std::uint64_t address, std::uint32_t value) {
    cpu.write(address, value);
    sc_core::wait(cpu.delay);
  }
  void flush() {
    sc_core::sc_time delay;
    cache->flush(delay);
    sc_core::wait(delay);
  }
  static std::uint32_t word(const Awkward& target, std::uint64_t address) {
    std::uint32_t value = 0;
    target.bytes.read(address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  // All is well on our side of the hops, and with the sums.
  void check() const {
    for (const auto* hop : {&ram_hop.rules(), &device_hop.rules()}) {
      for (const BrokenRule& rule : hop->broken())
        if (rule.by == Side::initiator) FAIL_CHECK(rule.text);
      CHECK(hop->in_flight() == 0);
    }
    for (const Awkward* target : {&ram, &device})
      for (const Awkward::Seen& one : target->seen) CHECK(one.fresh);
    CHECK(bus.broken_laws().empty());
    CHECK(cache->broken_laws().empty());
    CHECK(cache->totals().parts.total() == cache->totals().latency().sum());
  }

  Awkward ram{"ram"}, device{"device"};
  BaseProtocolObserver<> ram_hop{"ram_hop"}, device_hop{"device_hop"};
  SnoopingBus bus;
  std::unique_ptr<CoherentCache> cache;
  Driver cpu{"cpu"};
};

// The same in both timings, one after the other.
struct Beds {
  explicit Beds(const char* protocol, unsigned max_burst = 0, bool no_status_is_ok = false)
      : annotated("annotated", BusTiming::annotated, protocol, max_burst, no_status_is_ok),
        arbitrated("arbitrated", BusTiming::arbitrated, protocol, max_burst, no_status_is_ok) {
    warnings().clear();
    sc_core::sc_report_handler::set_handler(
        [](const sc_core::sc_report& report, const sc_core::sc_actions& actions) {
          if (report.get_severity() == sc_core::SC_WARNING)
            warnings().push_back(std::string(report.get_msg_type()) + ": " + report.get_msg());
          else
            sc_core::sc_report_handler::default_handler(report, actions);
        });
  }
  void each(const std::function<void(Bed&)>& body) {
    simulate([&] {
      for (Bed* bed : {&annotated, &arbitrated}) {
        INFO(bed->name());
        body(*bed);
        settle();
        bed->check();
      }
    });
  }
  static std::vector<std::string>& warnings() {
    static std::vector<std::string> all;
    return all;
  }
  // One of each bus, about this window, with these words.
  static void check_warnings(const std::string& window, const std::string& words) {
    REQUIRE(warnings().size() == 2);
    for (std::size_t i = 0; i < 2; ++i) {
      INFO(warnings()[i]);
      CHECK(warnings()[i].find(std::string("/earshot/bus/target: ") + (i == 0 ? "annotated" : "arbitrated") +
                               ".bus." + window + ": the target of window '" + window + "' ") == 0);
      CHECK(warnings()[i].find(words) != std::string::npos);
    }
  }
  Bed annotated, arbitrated;
};

}  // namespace earshot::test
