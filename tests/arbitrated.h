// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Helpers for tests of arbitrated timing: a target and an initiator that do what the test says, phase by
// phase, and caches on a bus between them with the monitor watching. Header only; one simulation per process.
#pragma once

#include <array>
#include <deque>
#include <list>
#include <map>
#include <sstream>

#include "simulated.h"

namespace earshot::test {

inline sc_core::sc_time ns(double value) {
  return {value, sc_core::SC_NS};
}
inline Picoseconds ps(double nanoseconds) {
  return to_ps(ns(nanoseconds));
}

// A memory. By default it completes every access early, `latency` later, one access not delaying another;
// what is `held` it keeps until the test lets it answer.
class ScriptedTarget : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  tlm::tlm_target_socket<> target_socket{"target_socket"};

  struct Request {
    bool write;
    std::uint64_t address;
    unsigned length;
    Picoseconds at;  // the begin of its request phase
  };
  using Payload = tlm::tlm_generic_payload;

  explicit ScriptedTarget(sc_core::sc_module_name name) : sc_module(name) {
    target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
  }

  sc_core::sc_time latency = ns(60);
  std::function<bool(const Payload&)> refuses = [](const Payload&) { return false; };
  bool hold = false;         // keep requests from now on
  bool end_requests = true;  // those kept: END_REQ at once
  std::deque<Payload*> held;
  std::vector<Request> requests;  // every one, in the order of arrival
  // If set, decides all by itself.
  std::function<tlm::tlm_sync_enum(Payload&, tlm::tlm_phase&, sc_core::sc_time&)> answer;
  std::function<void(Payload&)> end_response = [](Payload&) {};

  // Answers the oldest kept request.
  tlm::tlm_sync_enum respond(const sc_core::sc_time& later = sc_core::SC_ZERO_TIME) {
    Payload& payload = *held.front();
    held.pop_front();
    move(payload);
    tlm::tlm_phase phase = tlm::BEGIN_RESP;
    sc_core::sc_time time = later;
    const tlm::tlm_sync_enum answered = target_socket->nb_transport_bw(payload, phase, time);
    payload.release();
    return answered;
  }
  void move(Payload& payload) {
    if (refuses(payload)) {
      payload.set_response_status(tlm::TLM_GENERIC_ERROR_RESPONSE);
      return;
    }
    for (unsigned i = 0; i < payload.get_data_length(); ++i) {
      const std::uint8_t* const enable = payload.get_byte_enable_ptr();
      if (enable != nullptr && enable[i % payload.get_byte_enable_length()] != TLM_BYTE_ENABLED) continue;
      if (payload.is_write())
        bytes_.write(payload.get_address() + i, payload.get_data_ptr() + i, 1);
      else
        bytes_.read(payload.get_address() + i, payload.get_data_ptr() + i, 1);
    }
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const {
    bytes_.read(address, to, length);
  }
  std::uint32_t word(std::uint64_t address) const {
    std::uint32_t value = 0;
    peek(address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return value;
  }
  void poke(std::uint64_t address, std::uint32_t value) {
    bytes_.write(address, reinterpret_cast<const std::uint8_t*>(&value), sizeof value);
  }
  std::size_t count(bool write, std::uint64_t address) const {
    std::size_t found = 0;
    for (const Request& request : requests) found += request.write == write && request.address == address;
    return found;
  }

 private:
  void b_transport(Payload& payload, sc_core::sc_time& delay) override {
    requests.push_back(
        {payload.is_write(), payload.get_address(), payload.get_data_length(), now_ps() + to_ps(delay)});
    move(payload);
    delay += latency;
  }
  tlm::tlm_sync_enum nb_transport_fw(Payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override {
    if (phase == tlm::END_RESP) {
      end_response(payload);
      return tlm::TLM_COMPLETED;
    }
    requests.push_back(
        {payload.is_write(), payload.get_address(), payload.get_data_length(), now_ps() + to_ps(time)});
    if (answer) return answer(payload, phase, time);
    if (!hold) {
      move(payload);
      time += latency;
      return tlm::TLM_COMPLETED;
    }
    payload.acquire();
    held.push_back(&payload);
    if (!end_requests) return tlm::TLM_ACCEPTED;
    phase = tlm::END_REQ;
    return tlm::TLM_UPDATED;
  }
  bool get_direct_mem_ptr(Payload&, tlm::tlm_dmi&) override { return false; }
  unsigned transport_dbg(Payload& payload) override {
    if (payload.is_write())
      bytes_.write(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    else
      bytes_.read(payload.get_address(), payload.get_data_ptr(), payload.get_data_length());
    return payload.get_data_length();
  }

  SparseBytes bytes_;
};

// An initiator with both kinds of transport.
class Requester : public sc_core::sc_module, private tlm::tlm_mm_interface {
 public:
  tlm_utils::simple_initiator_socket<Requester> socket{"socket"};

  struct Access : tlm::tlm_generic_payload {
    explicit Access(tlm::tlm_mm_interface* owner) : tlm_generic_payload(owner) {}
    std::array<std::uint8_t, 128> bytes{};
    std::string name;
    Picoseconds sent = 0, ended_request = 0, responded = 0;  // with the times annotated; 0: not yet
    std::uint32_t value(unsigned at = 0) const {
      std::uint32_t word = 0;
      std::memcpy(&word, &bytes[at], sizeof word);
      return word;
    }
  };

  explicit Requester(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &Requester::backward);
    // Several blocking callers may be waiting at once, so nothing of theirs is kept here.
  }

  // ---- Blocking
  tlm::tlm_response_status transport(tlm::tlm_command command, std::uint64_t address, void* data,
                                     unsigned length, sc_core::sc_time delay = sc_core::SC_ZERO_TIME,
                                     std::vector<std::uint8_t> enables = {}) {
    // Ends with the call, also if its process is killed; a caller that still waits at the end is never unwound.
    struct Ending {
      std::list<Call>& calls;
      std::list<Call>::iterator call;
      ~Ending() { calls.erase(call); }
    } ending{calls_, calls_.emplace(calls_.end())};
    tlm::tlm_generic_payload& payload = ending.call->payload;
    ending.call->enables.swap(enables);
    prepare(payload, command, address, static_cast<std::uint8_t*>(data), length);
    payload.set_byte_enable_ptr(ending.call->enables.empty() ? nullptr : ending.call->enables.data());
    payload.set_byte_enable_length(static_cast<unsigned>(ending.call->enables.size()));
    socket->b_transport(payload, delay);
    if (delay != sc_core::SC_ZERO_TIME) throw std::logic_error("b_transport leaves a delay");
    status = payload.get_response_status();
    return status;
  }
  std::uint32_t read(std::uint64_t address) {
    std::uint32_t value = 0xdeadbeef;
    transport(tlm::TLM_READ_COMMAND, address, &value, sizeof value);
    return value;
  }
  void write(std::uint64_t address, std::uint32_t value) {
    transport(tlm::TLM_WRITE_COMMAND, address, &value, sizeof value);
  }
  std::uint32_t debug_read(std::uint64_t address) {
    std::uint32_t value = 0xdeadbeef;
    if (debug(tlm::TLM_READ_COMMAND, address, value) != 4) throw std::logic_error("debug read refused");
    return value;
  }
  void debug_write(std::uint64_t address, std::uint32_t value) {
    if (debug(tlm::TLM_WRITE_COMMAND, address, value) != 4) throw std::logic_error("debug write refused");
  }
  tlm::tlm_response_status status = tlm::TLM_INCOMPLETE_RESPONSE;  // of the blocking access that ended last

  // ---- Non-blocking
  // BEGIN_REQ of a new access; it stays valid until the test ends.
  Access& send(const std::string& name, tlm::tlm_command command, std::uint64_t address,
               std::uint32_t value = 0, unsigned length = 4,
               const sc_core::sc_time& later = sc_core::SC_ZERO_TIME) {
    accesses_.push_back(std::make_unique<Access>(static_cast<tlm::tlm_mm_interface*>(this)));
    Access& access = *accesses_.back();
    access.name = name;
    prepare(access, command, address, access.bytes.data(), length);
    for (unsigned i = 0; command == tlm::TLM_WRITE_COMMAND && i < length; i += 4)
      std::memcpy(&access.bytes[i], &value, std::min(4u, length - i));
    access.acquire();
    begin(access, later);
    return access;
  }
  Access& send_read(const std::string& name, std::uint64_t address) {
    return send(name, tlm::TLM_READ_COMMAND, address);
  }
  Access& send_write(const std::string& name, std::uint64_t address, std::uint32_t value) {
    return send(name, tlm::TLM_WRITE_COMMAND, address, value);
  }
  tlm::tlm_sync_enum begin(Access& access, const sc_core::sc_time& later = sc_core::SC_ZERO_TIME) {
    access.sent = now_ps() + to_ps(later);
    return phase(access, tlm::BEGIN_REQ, later);
  }
  tlm::tlm_sync_enum phase(tlm::tlm_generic_payload& payload, tlm::tlm_phase what,
                           sc_core::sc_time time = sc_core::SC_ZERO_TIME) {
    return socket->nb_transport_fw(payload, what, time);
  }
  // What came back, in order: "a END_REQ, b BEGIN_RESP".
  std::string heard;
  std::function<tlm::tlm_sync_enum(Access&, tlm::tlm_phase&, sc_core::sc_time&)> on_response =
      [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_COMPLETED; };
  std::function<tlm::tlm_sync_enum(Access&)> on_end_request = [](Access&) { return tlm::TLM_ACCEPTED; };
  sc_core::sc_event changed;  // at every phase heard
  unsigned freed = 0;         // payloads that nobody holds any more
  // Drops the accesses of before. REQUIRES: all are answered.
  void forget() {
    accesses_.clear();
    heard.clear();
  }

 private:
  static void prepare(tlm::tlm_generic_payload& payload, tlm::tlm_command command, std::uint64_t address,
                      std::uint8_t* data, unsigned length) {
    payload.set_command(command);
    payload.set_address(address);
    payload.set_data_ptr(data);
    payload.set_data_length(length);
    payload.set_streaming_width(length);
    payload.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  }
  unsigned debug(tlm::tlm_command command, std::uint64_t address, std::uint32_t& value) {
    tlm::tlm_generic_payload payload;
    prepare(payload, command, address, reinterpret_cast<std::uint8_t*>(&value), sizeof value);
    return socket->transport_dbg(payload);
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& what,
                              sc_core::sc_time& time) {
    Access& access = static_cast<Access&>(payload);
    std::ostringstream text;
    text << (heard.empty() ? "" : ", ") << access.name << ' ' << what;
    heard += text.str();
    changed.notify();
    (what == tlm::END_REQ ? access.ended_request : access.responded) = now_ps() + to_ps(time);
    return what == tlm::END_REQ ? on_end_request(access) : on_response(access, what, time);
  }
  void free(tlm::tlm_generic_payload*) override { ++freed; }

  struct Call {
    tlm::tlm_generic_payload payload;
    std::vector<std::uint8_t> enables;
  };
  std::list<Call> calls_;  // of blocking callers
  std::vector<std::unique_ptr<Access>> accesses_;
};

struct BenchOptions {
  int caches = 2;
  Geometry geometry{256, 2, 32, Replacement::lru, 1};
  SnoopingBusConfig bus{};  // but for windows and timing
  CacheConfig cache{};      // but for geometry and table
  bool watched = true;
};

// Caches in arbitrated timing on a bus, a ScriptedTarget behind the cached window [0, 0x100000) and one
// behind the uncached one from there on, a Requester before every cache.
class Bench {
 public:
  static constexpr std::uint64_t device_base = 0x100000;

  explicit Bench(const Table& protocol, const BenchOptions& options = {}) {
    SnoopingBusConfig bus_config = options.bus;
    bus_config.timing = BusTiming::arbitrated;
    bus_config.windows = {{"memory", 0, device_base, true, 0}, {"device", device_base, 0x10000, false, 0}};
    bus = std::make_unique<SnoopingBus>("bus", bus_config);
    bus->window_socket("memory").bind(memory.target_socket);
    bus->window_socket("device").bind(device.target_socket);
    CacheConfig config = options.cache;
    config.geometry = options.geometry;
    config.table = std::make_shared<const Table>(protocol);
    for (int i = 0; i < options.caches; ++i) {
      const std::string number = std::to_string(i);
      if (protocol.family() == Family::update)
        caches.push_back(std::make_unique<UpdatingCache>(("cache" + number).c_str(), config));
      else
        caches.push_back(std::make_unique<InvalidatingCache>(("cache" + number).c_str(), config));
      caches.back()->bus_socket.bind(bus->cache_socket);
      cpus.push_back(std::make_unique<Requester>(("cpu" + number).c_str()));
      cpus.back()->socket.bind(caches.back()->cpu_socket);
    }
    if (!options.watched) return;
    monitor = std::make_unique<CoherenceMonitor>(
        options.geometry.line_bytes, [this](std::uint64_t address, std::uint8_t* to, std::size_t length) {
          memory.peek(address, to, length);
        });
    for (const auto& cache : caches) cache->set_observer(monitor.get());
  }

  Requester& cpu(int i) { return *cpus[static_cast<std::size_t>(i)]; }
  CoherentCache& cache(int i) { return *caches[static_cast<std::size_t>(i)]; }
  std::string states(std::uint64_t address) const {
    std::string text;
    for (const auto& cache : caches) text += (text.empty() ? "" : " ") + cache->state_of(address);
    return text;
  }
  std::uint64_t count(BusKind kind) const { return bus->totals().kind[static_cast<std::size_t>(kind)].count; }
  // Everything that fails of the self-checks; empty if all is well.
  std::string broken_laws() const {
    std::string text;
    for (const std::string& law : bus->broken_laws()) text += law + '\n';
    for (const auto& cache : caches) {
      for (const std::string& law : cache->broken_laws()) text += law + '\n';
      const CacheTotals totals = cache->totals();
      if (totals.parts.total() != totals.latency().sum()) text += "parts are not the latencies\n";
    }
    return text;
  }
  // Writes every line back, from a simulation process; afterwards memory holds the last value of everything.
  std::uint64_t flush() {
    std::uint64_t refused = 0;
    for (const auto& cache : caches) {
      sc_core::sc_time delay;
      refused += cache->flush(delay);
    }
    return refused;
  }

  ScriptedTarget memory{"memory"}, device{"device"};
  std::unique_ptr<SnoopingBus> bus;
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::vector<std::unique_ptr<Requester>> cpus;
  std::unique_ptr<CoherenceMonitor> monitor;
};

// One of several systems in one simulation: names below its own.
struct BoxedBench : sc_core::sc_module {
  BoxedBench(sc_core::sc_module_name name, const Table& protocol, const BenchOptions& options = {})
      : sc_module(name), bench(protocol, options) {}
  Bench bench;
};

// Runs the bodies at once, from a simulation process, and waits until all have ended. Rethrows what one
// throws.
inline void at_once(const std::vector<std::function<void()>>& bodies) {
  std::exception_ptr error;
  std::size_t running = bodies.size();
  sc_core::sc_event ended;
  for (const auto& body : bodies)
    sc_core::sc_spawn([&error, &running, &ended, &body] {
      try {
        body();
      } catch (const std::exception&) {
        error = std::current_exception();
      }
      if (--running == 0) ended.notify();
    });
  while (running > 0) sc_core::wait(ended);
  if (error) std::rethrow_exception(error);
}

// Waits, from a simulation process, until the time is a multiple of `clock`, some cycles on: whatever was
// under way has ended, and clock edges fall as they do at time 0.
inline void settle(const sc_core::sc_time& clock = ns(5)) {
  const Picoseconds step = to_ps(clock) * 2000;
  sc_core::wait(from_ps((now_ps() / step + 2) * step - now_ps()));
}

// The built-in protocols, and the bus structures by number.
inline BusStructure structure(int number) {
  return number == 0 ? BusStructure::split : BusStructure::connected;
}

}  // namespace earshot::test
