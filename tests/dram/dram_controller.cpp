// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// DramController as an ordinary TLM-2.0 target, without our bus (IEEE 1666-2011, clauses 11, 14 and 15). The
// grade is ddr4-2400t: 1200 MHz, CL 17, tRCD 17, tRP 17, bursts of 64 bytes in 4 clocks; edge n is at floor(n
// * 5000 / 6) ps.
#include "earshot/dram/dram_controller.h"

#include <catch2/catch.hpp>
#include <map>
#include <random>

#include "dram/command_checker.h"
#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

DramConfig usual() {
  DramConfig config;
  config.grade = load_grade("ddr4-2400t");
  config.log_commands = true;
  return config;
}

sc_core::sc_time edge(Clocks n) {
  return from_ps(n * 5000 / 6);
}

constexpr std::uint64_t row_stride = std::uint64_t{1} << 20;  // more than a row of all banks

struct Direct {
  DramController memory;
  Driver cpu{"cpu"};
  explicit Direct(const DramConfig& config = usual()) : memory("memory", config) {
    cpu.socket.bind(memory.target_socket);
  }
  sc_core::sc_time time_of(const std::function<void()>& access) {
    const sc_core::sc_time start = sc_core::sc_time_stamp();
    access();
    return sc_core::sc_time_stamp() - start;
  }
};

// An initiator of nonblocking transactions that keeps an account of them.
class Asker : public sc_core::sc_module, public tlm::tlm_mm_interface {
 public:
  enum Style { ends_later, ends_in_return, completes, ends_in_call };

  tlm_utils::simple_initiator_socket<Asker> socket{"socket"};
  Style style = ends_in_return;
  sc_core::sc_time think;  // ends_later, ends_in_return: before END_RESP takes effect

  struct Transaction {
    tlm::tlm_generic_payload payload;
    std::vector<std::uint8_t> data;
    MemoryTimes times;
    sc_core::sc_time begun, requested, answered;
    explicit Transaction(tlm::tlm_mm_interface* mm) : payload(mm) {}
  };

  explicit Asker(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_bw(this, &Asker::backward);
    SC_HAS_PROCESS(Asker);
    SC_METHOD(end_later);
    sensitive << end_;
    dont_initialize();
  }

  // Sends BEGIN_REQ, waiting for its turn first.
  Transaction& ask(bool write, std::uint64_t address, std::vector<std::uint8_t> data,
                   sc_core::sc_time time = sc_core::SC_ZERO_TIME) {
    while (open_ != nullptr) sc_core::wait(request_ended_);
    all.push_back(std::make_unique<Transaction>(this));
    Transaction& one = *all.back();
    one.data = std::move(data);
    one.payload.set_command(write ? tlm::TLM_WRITE_COMMAND : tlm::TLM_READ_COMMAND);
    one.payload.set_address(address);
    one.payload.set_data_ptr(one.data.data());
    one.payload.set_data_length(static_cast<unsigned>(one.data.size()));
    one.payload.set_streaming_width(static_cast<unsigned>(one.data.size()));
    one.payload.set_extension(&one.times);
    one.begun = sc_core::sc_time_stamp() + time;
    one.payload.acquire();
    ++alive;
    open_ = &one;
    last_answer = send(one.payload, tlm::BEGIN_REQ, time);
    if (last_answer == tlm::TLM_UPDATED) {
      CHECK(last_phase == tlm::END_REQ);
      one.requested = sc_core::sc_time_stamp();
      open_ = nullptr;
    } else if (last_answer == tlm::TLM_COMPLETED) {
      answered(one.payload);
      open_ = nullptr;
    }
    return one;
  }
  Transaction& read(std::uint64_t address, unsigned length = 64) {
    return ask(false, address, std::vector<std::uint8_t>(length, 0xee));
  }
  tlm::tlm_sync_enum send(tlm::tlm_generic_payload& payload, tlm::tlm_phase phase,
                          sc_core::sc_time time = sc_core::SC_ZERO_TIME) {
    const tlm::tlm_sync_enum answer = socket->nb_transport_fw(payload, phase, time);
    last_phase = phase;
    last_time = time;
    return answer;
  }
  void finish() {
    while (alive > 0) sc_core::wait(response_);
  }

  std::vector<std::unique_ptr<Transaction>> all;  // in order of their requests
  std::vector<Transaction*> order;                // of their responses
  unsigned alive = 0;
  tlm::tlm_sync_enum last_answer = tlm::TLM_ACCEPTED;
  tlm::tlm_phase last_phase;
  sc_core::sc_time last_time;

 private:
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                              sc_core::sc_time& time) {
    CHECK(time == sc_core::SC_ZERO_TIME);
    if (phase == tlm::END_REQ) {
      REQUIRE(open_ != nullptr);
      REQUIRE(&open_->payload == &payload);
      open_->requested = sc_core::sc_time_stamp();
      open_ = nullptr;
      request_ended_.notify(sc_core::SC_ZERO_TIME);
      return tlm::TLM_ACCEPTED;
    }
    REQUIRE(phase == tlm::BEGIN_RESP);
    REQUIRE(responding_ == nullptr);
    REQUIRE(sc_core::sc_time_stamp() >= not_before_);
    CHECK(payload.get_response_status() == tlm::TLM_OK_RESPONSE);
    answered(payload);
    switch (style) {
      case ends_later:
        responding_ = &payload;
        end_.notify(think);
        return tlm::TLM_ACCEPTED;
      case ends_in_return:
        phase = tlm::END_RESP;
        time = think;
        not_before_ = sc_core::sc_time_stamp() + think;
        return tlm::TLM_UPDATED;
      case completes:
        return tlm::TLM_COMPLETED;
      case ends_in_call:
        CHECK(send(payload, tlm::END_RESP) == tlm::TLM_COMPLETED);
        return tlm::TLM_ACCEPTED;
    }
    return tlm::TLM_ACCEPTED;
  }
  void answered(tlm::tlm_generic_payload& payload) {
    for (const auto& one : all) {
      if (&one->payload != &payload) continue;
      one->answered = sc_core::sc_time_stamp();
      order.push_back(one.get());
    }
    payload.release();
  }
  void end_later() {
    tlm::tlm_generic_payload* const payload = responding_;
    responding_ = nullptr;
    send(*payload, tlm::END_RESP);
  }
  void free(tlm::tlm_generic_payload* payload) override {
    payload->clear_extension<MemoryTimes>();
    --alive;
    response_.notify(sc_core::SC_ZERO_TIME);
  }

  Transaction* open_ = nullptr;
  tlm::tlm_generic_payload* responding_ = nullptr;
  sc_core::sc_time not_before_;
  sc_core::sc_event request_ended_, response_, end_;
};

struct Pipelined {
  DramController memory;
  Asker cpu{"cpu"};
  explicit Pipelined(const DramConfig& config = usual()) : memory("memory", config) {
    cpu.socket.bind(memory.target_socket);
  }
};

}  // namespace

TEST_CASE("b_transport waits for exactly a closed bank, a hit, a conflict", "[dram]") {
  Direct direct;
  simulate([&] {
    CHECK(direct.time_of([&] { direct.cpu.read(0); }) == edge(17 + 17 + 4));
    CHECK(direct.cpu.delay == sc_core::SC_ZERO_TIME);
    sc_core::wait(edge(600) - sc_core::sc_time_stamp());
    CHECK(direct.time_of([&] { direct.cpu.read(4); }) == edge(17 + 4));
    sc_core::wait(edge(1200) - sc_core::sc_time_stamp());
    CHECK(direct.time_of([&] { direct.cpu.read(row_stride); }) == edge(17 + 17 + 17 + 4));
    CHECK(direct.memory.busy_time() == 12 * 5000 / 6);
    CHECK(direct.memory.busy_until() == to_ps(sc_core::sc_time_stamp()));
    CHECK(direct.memory.counts().read_bursts == 3);
    CHECK(direct.memory.broken_laws().empty());
    require_legal(direct.memory.commands(0), direct.memory.config());
  });
}

TEST_CASE("the waiting is told exactly: to the clock edge, for the bank, for the queue", "[dram]") {
  Direct direct;
  simulate([&] {
    std::uint32_t value = 0;
    const auto read = [&](std::uint64_t address, sc_core::sc_time delay) {
      tlm::tlm_generic_payload payload;
      MemoryTimes times;
      payload.set_extension(&times);
      payload.set_command(tlm::TLM_READ_COMMAND);
      payload.set_address(address);
      payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
      payload.set_data_length(4);
      payload.set_streaming_width(4);
      direct.cpu.socket->b_transport(payload, delay);
      payload.clear_extension(&times);
      return times.queue;
    };
    const Picoseconds start = now_ps();
    CHECK(read(0, sc_core::sc_time(100, sc_core::SC_PS)) == 833 - 100);
    CHECK(now_ps() - start == 39 * 5000 / 6);
    // The row was opened at clock 1; it may be closed 39 clocks later.
    CHECK(read(row_stride, sc_core::SC_ZERO_TIME) == 40 * 5000 / 6 - 39 * 5000 / 6);
  });
}

TEST_CASE("a request of several bursts is done with the last, and ends in whichever burst", "[dram]") {
  Direct direct;
  simulate([&] {
    std::vector<std::uint8_t> out(256), in(256);
    for (unsigned i = 0; i < 256; ++i) out[i] = static_cast<std::uint8_t>(i * 7);
    CHECK(direct.cpu.transport(tlm::TLM_WRITE_COMMAND, 0x1020, out.data(), 256) == tlm::TLM_OK_RESPONSE);
    CHECK(direct.memory.write_meter(0).arrivals() == 5);
    sc_core::wait(edge(1200) - sc_core::sc_time_stamp());
    // Four bursts in four groups: activations tRRD_S = 4 apart.
    CHECK(direct.time_of([&] {
      direct.cpu.transport(tlm::TLM_READ_COMMAND, row_stride * 4, in.data(), 256);
    }) == edge(17 + 17 + 17 + 4 + 3 * 4));
    CHECK(direct.cpu.transport(tlm::TLM_READ_COMMAND, 0x1020, in.data(), 256) == tlm::TLM_OK_RESPONSE);
    CHECK(in == out);
  });
}

TEST_CASE("a write is done when it is queued, and read back from there", "[dram]") {
  DramConfig config = usual();
  config.frontend = 3;
  config.backend = 4;
  Direct direct(config);
  simulate([&] {
    CHECK(direct.time_of([&] { direct.cpu.write(0x40, 0x12345678); }) == edge(7));
    sc_core::wait(edge(600) - sc_core::sc_time_stamp());
    CHECK(direct.cpu.read(0x40) == 0x12345678);
    CHECK(sc_core::sc_time_stamp() == edge(600 + 17 + 4 + 7));
    CHECK(direct.memory.counts().write_bursts == 1);
    std::uint32_t value = 0;
    direct.memory.peek(0x40, reinterpret_cast<std::uint8_t*>(&value), 4);
    CHECK(value == 0x12345678);
  });
}

TEST_CASE("with room a request ends at once, else when a burst has left the queue", "[dram]") {
  DramConfig config = usual();
  config.read_queue = 2;
  Pipelined pipelined(config);
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    cpu.read(0);
    CHECK(cpu.last_answer == tlm::TLM_UPDATED);
    cpu.read(64);
    CHECK(cpu.last_answer == tlm::TLM_UPDATED);
    Asker::Transaction& third = cpu.read(128);
    CHECK(cpu.last_answer == tlm::TLM_ACCEPTED);
    CHECK(pipelined.memory.pending().front() ==
          "memory: 1 requests without a place; the first, a read of 64 bytes at 128, arrived at 0 ps, waits "
          "for room "
          "in a queue");
    cpu.finish();
    CHECK(third.requested == edge(17));               // the first read command
    CHECK(third.answered == edge(18 + 17 + 17 + 4));  // the command bus is free a clock later
    CHECK(third.times.queue == to_ps(edge(18)));
    CHECK(cpu.order.size() == 3);
    CHECK(pipelined.memory.entry_meter().most() == 1);
    CHECK(pipelined.memory.broken_laws().empty());
  });
}

TEST_CASE("a request with a time takes effect then", "[dram]") {
  Pipelined pipelined;
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    Asker::Transaction& later = cpu.ask(false, 0, std::vector<std::uint8_t>(4), edge(100));
    CHECK(cpu.last_answer == tlm::TLM_ACCEPTED);
    cpu.finish();
    CHECK(later.requested == edge(100));
    CHECK(later.answered == edge(100 + 17 + 17 + 4));
    CHECK(later.times.queue == 0);
  });
}

TEST_CASE("one response at a time: the next waits for the end of the one before, and says so", "[dram]") {
  Pipelined pipelined;
  pipelined.cpu.style = Asker::ends_later;
  pipelined.cpu.think = sc_core::sc_time(1, sc_core::SC_US);
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    Asker::Transaction& first = cpu.read(0);
    Asker::Transaction& second = cpu.read(64);
    sc_core::wait(edge(100));
    REQUIRE(pipelined.memory.pending().size() == 1);
    CHECK(pipelined.memory.pending().front() ==
          "memory: 2 responses; the first, to a read of 64 bytes at 0, arrived at 0 ps, waits for END_RESP "
          "from "
          "cpu.socket");
    cpu.finish();
    CHECK(first.answered == edge(38));
    CHECK(second.answered == edge(38) + cpu.think);
    CHECK(second.times.queue == to_ps(second.answered) - to_ps(edge(42)) + to_ps(edge(4)));
  });
}

namespace {

// Random traffic of one initiator; the order of requests is the order of memory.
void stress(Asker::Style style, const DramConfig& config, std::uint64_t seed) {
  Pipelined pipelined(config);
  pipelined.cpu.style = style;
  if (style == Asker::ends_later || style == Asker::ends_in_return) pipelined.cpu.think = edge(3);
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    std::mt19937_64 random(seed);
    std::vector<std::uint8_t> memory(8 * row_stride);
    std::vector<std::vector<std::uint8_t>> expected;
    for (unsigned n = 0; n < 4000; ++n) {
      const std::uint64_t address = random() % 8 * row_stride + random() % 300;
      const bool write = random() % 2 == 0;
      std::vector<std::uint8_t> data(1 + random() % (random() % 8 == 0 ? 700 : 64));
      for (std::uint8_t& byte : data) byte = static_cast<std::uint8_t>(random());
      if (write) std::copy(data.begin(), data.end(), memory.begin() + static_cast<std::ptrdiff_t>(address));
      expected.emplace_back(memory.begin() + static_cast<std::ptrdiff_t>(address),
                            memory.begin() + static_cast<std::ptrdiff_t>(address + data.size()));
      cpu.ask(write, address, data, random() % 4 == 0 ? edge(random() % 20) : sc_core::SC_ZERO_TIME);
      if (random() % 16 == 0) sc_core::wait(static_cast<double>(random() % 200000), sc_core::SC_PS);
    }
    cpu.finish();
    REQUIRE(cpu.order.size() == 4000);
    std::map<const Asker::Transaction*, std::size_t> place_in_order;
    for (std::size_t i = 0; i < cpu.order.size(); ++i) place_in_order[cpu.order[i]] = i;
    std::map<std::uint64_t, std::size_t> latest;  // response of each burst
    unsigned overtaken = 0, wrong = 0, bad_parts = 0, out_of_order = 0;
    for (std::size_t i = 0; i < cpu.all.size(); ++i) {
      const Asker::Transaction& one = *cpu.all[i];
      if (one.data != expected[i]) ++wrong;
      if (one.times.queue > to_ps(one.answered - one.begun)) ++bad_parts;
      const std::size_t at = place_in_order[&one];
      if (at < i) ++overtaken;
      const std::uint64_t first = one.payload.get_address() / 64;
      for (std::uint64_t burst = first; burst <= (one.payload.get_address() + one.data.size() - 1) / 64;
           ++burst) {
        if (latest.count(burst) != 0 && latest[burst] > at) ++out_of_order;
        latest[burst] = at;
      }
    }
    CHECK(wrong == 0);
    CHECK(out_of_order == 0);
    CHECK(bad_parts == 0);
    CHECK(overtaken > 0);
    CHECK(pipelined.memory.broken_laws().empty());
    sc_core::wait(100, sc_core::SC_US);  // writes go to the banks long after they are done
    CHECK(pipelined.memory.pending().empty());
    for (unsigned c = 0; c < config.channels; ++c) require_legal(pipelined.memory.commands(c), config);
  });
}

}  // namespace

TEST_CASE("random requests answered in every style: right bytes, order kept within a burst: END_RESP later",
          "[dram]") {
  stress(Asker::ends_later, usual(), 1);
}
TEST_CASE("random requests answered in every style: right bytes, order kept within a burst: updated",
          "[dram]") {
  DramConfig config = usual();
  config.channels = 2;
  config.ranks = 2;
  stress(Asker::ends_in_return, config, 2);
}
TEST_CASE("random requests answered in every style: right bytes, order kept within a burst: completed",
          "[dram]") {
  DramConfig config = usual();
  config.read_queue = config.write_queue = 3;
  config.write_high = 2;
  config.write_low = 1;
  config.hash_banks = true;
  stress(Asker::completes, config, 3);
}
TEST_CASE("random requests answered in every style: right bytes, order kept within a burst: in the call",
          "[dram]") {
  DramConfig config = usual();
  config.rows = DramRows::closed;
  config.frontend = 5;
  stress(Asker::ends_in_call, config, 4);
}

TEST_CASE("many blocking callers at once each get their own bytes", "[dram]") {
  DramConfig config = usual();
  config.read_queue = 4;
  DramController memory("memory", config);
  std::vector<std::unique_ptr<Driver>> cpus;
  cpus.push_back(std::make_unique<Driver>("cpu"));
  cpus.back()->socket.bind(memory.target_socket);
  unsigned wrong = 0;
  simulate([&] {
    sc_core::sc_join join;
    for (unsigned i = 0; i < 20; ++i)
      join.add_process(sc_core::sc_spawn([&, i] {
        for (unsigned n = 0; n < 50; ++n) {
          std::uint32_t value = i * 1000 + n, back = 0;
          tlm::tlm_generic_payload payload;
          payload.set_address(i * row_stride + n % 5 * 64);
          payload.set_data_length(4);
          payload.set_streaming_width(4);
          sc_core::sc_time delay(i * 100, sc_core::SC_PS);
          payload.set_write();
          payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
          cpus[0]->socket->b_transport(payload, delay);
          payload.set_read();
          payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&back));
          cpus[0]->socket->b_transport(payload, delay);
          if (back != value || delay != sc_core::SC_ZERO_TIME) ++wrong;
        }
      }));
    join.wait();
    CHECK(wrong == 0);
    CHECK(memory.broken_laws().empty());
    CHECK(memory.counts().reads_from_queue > 0);
    require_legal(memory.commands(0), config);
  });
}

TEST_CASE("an idle controller has no events, and its refreshes are accounted for", "[dram]") {
  Direct direct;
  simulate([&] {
    direct.cpu.read(0);
    CHECK_FALSE(sc_core::sc_pending_activity());
    sc_core::wait(78, sc_core::SC_US);
    CHECK(direct.memory.counts().refreshes == 10);
  });
}

TEST_CASE("a phase out of order is an error with the names of both, and changes nothing", "[dram]") {
  DramConfig config = usual();
  config.read_queue = 1;
  Pipelined pipelined(config);
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    Asker::Transaction& first = cpu.read(0);
    CHECK_THROWS_WITH(cpu.send(first.payload, tlm::BEGIN_REQ), Catch::Contains("END_RESP, for this payload"));
    Asker::Transaction& second = cpu.read(64);  // no END_REQ yet
    tlm::tlm_generic_payload stranger;
    stranger.set_address(0x1234);
    stranger.set_write();
    CHECK_THROWS_WITH(
        cpu.send(stranger, tlm::BEGIN_REQ),
        Catch::Contains("/earshot/dram/protocol") &&
            Catch::Contains("memory, called by cpu.socket\n  got BEGIN_REQ for a write at 0x1234; "
                            "expected none before the END_REQ of the request before"));
    CHECK_THROWS_WITH(
        cpu.send(first.payload, tlm::END_RESP),
        Catch::Contains("got END_RESP for a read at 0x0; expected no END_RESP: no BEGIN_RESP is open"));
    CHECK_THROWS_WITH(cpu.send(first.payload, tlm::END_REQ), Catch::Contains("got END_REQ"));
    CHECK_THROWS_WITH(cpu.send(first.payload, tlm::BEGIN_RESP), Catch::Contains("got BEGIN_RESP"));
    cpu.style = Asker::ends_later;
    cpu.think = edge(1000);
    sc_core::wait(edge(100));
    CHECK_THROWS_WITH(cpu.send(second.payload, tlm::END_RESP),
                      Catch::Contains("expected the END_RESP of the response that is open"));
    cpu.finish();
    CHECK(cpu.order.size() == 2);
  });
}

TEST_CASE("bad transactions are answered as TLM-2.0 says, without time", "[dram]") {
  Pipelined pipelined;
  simulate([&] {
    const std::uint64_t bytes = pipelined.memory.config().bytes();
    CHECK(bytes == std::uint64_t{8} << 30);
    Asker& cpu = pipelined.cpu;
    const auto answer = [&](tlm::tlm_command command, std::uint64_t address, unsigned length,
                            unsigned width) {
      std::uint8_t data[128] = {};
      tlm::tlm_generic_payload payload;
      payload.set_command(command);
      payload.set_address(address);
      payload.set_data_ptr(data);
      payload.set_data_length(length);
      payload.set_streaming_width(width);
      CHECK(cpu.send(payload, tlm::BEGIN_REQ) == tlm::TLM_COMPLETED);
      const tlm::tlm_response_status early = payload.get_response_status();
      sc_core::sc_time delay;
      cpu.socket->b_transport(payload, delay);
      CHECK(payload.get_response_status() == early);
      CHECK(sc_core::sc_time_stamp() == sc_core::SC_ZERO_TIME);
      return early;
    };
    CHECK(answer(tlm::TLM_READ_COMMAND, 0, 0, 4) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(answer(tlm::TLM_READ_COMMAND, 0, 4, 0) == tlm::TLM_BURST_ERROR_RESPONSE);
    CHECK(answer(tlm::TLM_READ_COMMAND, bytes, 1, 1) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(answer(tlm::TLM_READ_COMMAND, bytes - 4, 8, 8) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(answer(tlm::TLM_WRITE_COMMAND, ~std::uint64_t{0}, 8, 8) == tlm::TLM_ADDRESS_ERROR_RESPONSE);
    CHECK(answer(tlm::TLM_IGNORE_COMMAND, 0, 4, 4) == tlm::TLM_OK_RESPONSE);
  });
}

TEST_CASE("debug access and DMI see the bytes, within the capacity", "[dram]") {
  Direct direct;
  simulate([&] {
    const std::uint64_t bytes = direct.memory.config().bytes();
    direct.cpu.write(0x12344, 0x11223344);
    CHECK(direct.cpu.debug_read(0x12344) == 0x11223344);
    std::uint8_t data[8] = {};
    CHECK(direct.cpu.debug(tlm::TLM_READ_COMMAND, bytes - 8, data, 8) == 8);
    CHECK(direct.cpu.debug(tlm::TLM_READ_COMMAND, bytes - 4, data, 8) == 0);
    tlm::tlm_generic_payload payload;
    tlm::tlm_dmi dmi;
    payload.set_address(0x12345);
    REQUIRE(direct.cpu.socket->get_direct_mem_ptr(payload, dmi));
    CHECK(dmi.get_start_address() == 0x12000);
    CHECK(dmi.get_end_address() == 0x12fff);
    CHECK(dmi.get_dmi_ptr()[0x344] == 0x44);
    payload.set_address(bytes);
    CHECK_FALSE(direct.cpu.socket->get_direct_mem_ptr(payload, dmi));
  });
}

TEST_CASE("the annotated pace never waits; an idle device is as slow as event by event", "[dram]") {
  DramConfig config = usual();
  config.pace = DramPace::annotated;
  Direct direct(config);
  simulate([&] {
    direct.cpu.read(0);
    CHECK(direct.cpu.delay == edge(17 + 17 + 4));
    direct.cpu.write(row_stride, 77);
    CHECK(direct.cpu.delay == sc_core::SC_ZERO_TIME);
    CHECK(direct.cpu.read(row_stride) == 77);
    CHECK(direct.cpu.delay > edge(17 + 4));
    CHECK(sc_core::sc_time_stamp() == sc_core::SC_ZERO_TIME);
    CHECK_FALSE(sc_core::sc_pending_activity());
    sc_core::wait(edge(1200));
    direct.cpu.read(row_stride + 8);
    CHECK(direct.cpu.delay == edge(17 + 4));
    CHECK(direct.memory.busy_time() == 4 * 4 * 5000 / 6);
    CHECK(direct.memory.counts().read_bursts == 3);
    CHECK(direct.memory.commands(0).empty());
  });
}

TEST_CASE("annotated nonblocking requests complete early", "[dram]") {
  DramConfig config = usual();
  config.pace = DramPace::annotated;
  Pipelined pipelined(config);
  simulate([&] {
    Asker& cpu = pipelined.cpu;
    cpu.read(0);
    CHECK(cpu.last_answer == tlm::TLM_COMPLETED);
    CHECK(cpu.last_time == edge(38));
    CHECK(cpu.all[0]->times.queue == 0);
  });
}

TEST_CASE("all that is wrong with a configuration is said at once", "[dram]") {
  DramConfig config = usual();
  config.grade.trc = 50;
  config.channel_bits = 68;
  config.write_low = 30;
  config.write_high = 40;
  config.refresh = DramRefresh::per_bank;
  CHECK_THROWS_WITH(DramController("memory", config),
                    Catch::Contains("/earshot/dram/config") && Catch::Contains("memory\n") &&
                        Catch::Contains("tRC") &&
                        Catch::Contains("write marks: the high mark 40 is above the queue's length 32") &&
                        Catch::Contains("refresh: per-bank refresh, which JESD79-4") &&
                        Catch::Contains("channel width: 68 bits are no multiple of a device's 8"));
}
