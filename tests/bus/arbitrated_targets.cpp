// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What stands behind an arbitrated bus: targets that answer in every manner the base protocol allows (IEEE
// 1666-2011, 15.2), targets that break it, and targets that never answer.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

using Payload = tlm::tlm_generic_payload;

std::string reported(const std::function<void()>& body) {
  try {
    body();
  } catch (const sc_core::sc_report& report) {
    return std::string(report.get_msg_type()) + ": " + report.get_msg();
  }
  return "";
}

constexpr const char* stall_id = "/earshot/bus/stall";

}  // namespace

// ---- The manners of answering

TEST_CASE("a target may answer by early completion, on the return path or by calls of its own", "[bus]") {
  Bench bench(load_table("msi"), {4});
  unsigned asked = 0, ended = 0;
  bench.memory.end_response = [&](Payload&) { ++ended; };
  std::vector<Payload*> kept;
  bench.memory.answer = [&](Payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    switch (asked++) {
      case 0:  // all at once, 60 ns on
        bench.memory.move(payload);
        time += ns(60);
        return tlm::TLM_COMPLETED;
      case 1:  // BEGIN_RESP on the return path: END_RESP is due
        bench.memory.move(payload);
        phase = tlm::BEGIN_RESP;
        time += ns(60);
        return tlm::TLM_UPDATED;
      case 2:  // END_REQ on the return path, the response later
        phase = tlm::END_REQ;
        time += ns(10);
        payload.acquire();
        bench.memory.held.push_back(&payload);
        return tlm::TLM_UPDATED;
      default:  // nothing yet
        payload.acquire();
        bench.memory.held.push_back(&payload);
        return tlm::TLM_ACCEPTED;
    }
  };
  simulate([&] {
    for (unsigned i = 0; i < 4; ++i) bench.memory.poke(0x100 * (i + 1), 10 + i);
    for (unsigned i = 0; i < 2; ++i) {
      const Picoseconds start = now_ps();
      CHECK(bench.cpu(0).read(0x100 * (i + 1)) == 10 + i);
      CHECK(now_ps() - start == ps(100));
      settle();
    }
    CHECK(ended == 1);
    for (unsigned i = 2; i < 4; ++i) {
      const Picoseconds start = now_ps();
      Picoseconds took = 0;
      at_once({[&] {
                 CHECK(bench.cpu(0).read(0x100 * (i + 1)) == 10 + i);
                 took = now_ps() - start;
               },
               [&] {
                 sc_core::wait(ns(70));
                 CHECK(bench.memory.respond(ns(3)) == tlm::TLM_COMPLETED);  // at 73: on the bus from 75 on
               }});
      CHECK(took == ps(95));
      settle();
    }
    CHECK(bench.bus->waiting() == "");
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a target is told of a fetch at its grant, for the instant at which the snoop ends", "[bus]") {
  Bench bench(load_table("msi"));
  Picoseconds called = 0;
  bench.memory.answer = [&](Payload& payload, tlm::tlm_phase&, sc_core::sc_time& time) {
    called = now_ps();
    CHECK(time == ns(10));
    bench.memory.move(payload);
    time += ns(60);
    return tlm::TLM_COMPLETED;
  };
  simulate([&] {
    bench.cpu(0).read(0x40);
    CHECK(called == ps(10));
    CHECK(bench.memory.requests.front().at == ps(20));
  });
}

TEST_CASE("one request phase at a time: later requests queue for END_REQ or BEGIN_RESP", "[bus]") {
  Bench bench(load_table("msi"), {3});
  bench.memory.hold = true;
  bench.memory.end_requests = false;
  simulate([&] {
    std::array<Picoseconds, 3> done{};
    at_once({[&] {
               bench.cpu(0).read(0x100);
               done[0] = now_ps();
             },
             [&] {
               bench.cpu(1).read(0x200);
               done[1] = now_ps();
             },
             [&] {
               bench.cpu(2).read(0x300);
               done[2] = now_ps();
             },
             [&] {
               sc_core::wait(ns(100));
               CHECK(bench.memory.requests.size() == 1);
               tlm::tlm_phase phase = tlm::END_REQ;
               sc_core::sc_time time = ns(7);
               CHECK(bench.memory.target_socket->nb_transport_bw(*bench.memory.held.front(), phase, time) ==
                     tlm::TLM_ACCEPTED);
               sc_core::wait(ns(6));
               CHECK(bench.memory.requests.size() == 1);
               sc_core::wait(ns(2));
               CHECK(bench.memory.requests.size() == 2);  // at 107
               CHECK(bench.memory.requests[1].at == ps(107));
               std::swap(bench.memory.held[0], bench.memory.held[1]);
               bench.memory.respond();  // the second's, which also ends its request
               CHECK(bench.memory.requests.size() == 2);  // no call on one path from within a call on the other
               sc_core::wait(sc_core::sc_time(1, sc_core::SC_PS));
               REQUIRE(bench.memory.requests.size() == 3);
               CHECK(bench.memory.requests[2].at == ps(108));
               bench.memory.respond();
               bench.memory.respond();
             }});
    CHECK(done ==
          std::array<Picoseconds, 3>{ps(150), ps(130), ps(170)});  // beats in the order of the answers
    // The waiting for the request phase is the memory's queue.
    CHECK(bench.cache(1).totals().parts[LatencyPart::memory_queue] == ps(107 - 25));
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("a target that answers within the call of BEGIN_REQ, and at once gets the next request", "[bus]") {
  Bench bench(load_table("msi"), {3});
  unsigned depth = 0, deepest = 0;
  bench.memory.answer = [&](Payload& payload, tlm::tlm_phase&, sc_core::sc_time&) {
    deepest = std::max(deepest, ++depth);
    payload.acquire();
    bench.memory.held.push_back(&payload);
    bench.memory.respond();
    --depth;
    return tlm::TLM_ACCEPTED;
  };
  simulate([&] {
    bench.memory.poke(0x200, 5);
    at_once({[&] { bench.cpu(0).read(0x100); }, [&] { CHECK(bench.cpu(1).read(0x200) == 5); },
             [&] { bench.cpu(2).write(0x300, 1); }});
    CHECK(bench.cpu(0).read(0x300) == 1);
    CHECK(bench.broken_laws() == "");
  });
}

TEST_CASE("what a target answers to one access is not left in the payload for the next", "[bus]") {
  Bench bench(load_table("write-through-update"));
  bench.memory.answer = [&](Payload& payload, tlm::tlm_phase&, sc_core::sc_time&) {
    CHECK(payload.get_response_status() == tlm::TLM_INCOMPLETE_RESPONSE);
    CHECK_FALSE(payload.is_dmi_allowed());
    CHECK(payload.get_extension<MemoryTimes>() != nullptr);
    if (payload.get_extension<MemoryTimes>() == nullptr) return tlm::TLM_COMPLETED;
    CHECK(payload.get_extension<MemoryTimes>()->queue == 0);
    payload.get_extension<MemoryTimes>()->queue = 1;
    CHECK(payload.get_data_length() == payload.get_streaming_width());
    bench.memory.move(payload);
    payload.set_dmi_allowed(true);
    return tlm::TLM_COMPLETED;
  };
  simulate([&] {
    std::vector<std::uint8_t> enables{TLM_BYTE_ENABLED, TLM_BYTE_DISABLED};
    std::uint32_t value = 0x11223344;
    bench.cpu(0).transport(tlm::TLM_WRITE_COMMAND, 0x40, &value, 4, sc_core::SC_ZERO_TIME, enables);
    CHECK(bench.memory.word(0x40) == 0x00220044);
    bench.cpu(0).write(0x44, 1);
    CHECK(bench.memory.word(0x44) == 1);
  });
}

TEST_CASE("an uncached access reaches its target as it is: width, enables, extensions, DMI hint; and back",
          "[bus]") {
  struct Note : tlm::tlm_extension<Note> {
    int value = 3;
    tlm::tlm_extension_base* clone() const override { return new Note(*this); }
    void copy_from(const tlm::tlm_extension_base& other) override { *this = static_cast<const Note&>(other); }
  } note;
  Bench bench(load_table("msi"));
  bench.device.answer = [&](Payload& payload, tlm::tlm_phase&, sc_core::sc_time&) {
    CHECK(payload.get_address() == 0x10);  // the target's own addresses
    CHECK(payload.get_streaming_width() == 4);
    CHECK(payload.get_byte_enable_length() == 8);
    auto* const reached = payload.get_extension<Note>();  // perhaps a copy: the caller may be killed
    CHECK(reached != nullptr);
    if (reached != nullptr) CHECK(std::exchange(reached->value, 7) == 3);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    payload.set_dmi_allowed(true);
    return tlm::TLM_COMPLETED;
  };
  simulate([&] {
    std::array<std::uint8_t, 8> data{}, enables{};
    enables.fill(TLM_BYTE_ENABLED);
    Payload payload;
    payload.set_command(tlm::TLM_WRITE_COMMAND);
    payload.set_address(Bench::device_base + 0x10);
    payload.set_data_ptr(data.data());
    payload.set_data_length(8);
    payload.set_streaming_width(4);
    payload.set_byte_enable_ptr(enables.data());
    payload.set_byte_enable_length(8);
    payload.set_extension(&note);
    sc_core::sc_time delay;
    bench.cpu(0).socket->b_transport(payload, delay);
    CHECK(payload.is_response_ok());
    CHECK(payload.get_address() == Bench::device_base + 0x10);
    CHECK(payload.is_dmi_allowed());
    CHECK(note.value == 7);
    // Lent, not given: the next access carries none.
    payload.clear_extension(&note);
    bench.device.answer = [&](Payload& next, tlm::tlm_phase&, sc_core::sc_time&) {
      CHECK(next.get_extension<Note>() == nullptr);
      next.set_response_status(tlm::TLM_OK_RESPONSE);
      return tlm::TLM_COMPLETED;
    };
    bench.cpu(0).socket->b_transport(payload, delay);
    CHECK_FALSE(payload.is_dmi_allowed());
  });
}

TEST_CASE("a byte enable length without byte enables means nothing, on an uncached access too", "[bus]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    std::uint32_t value = 0x1234;
    for (const std::uint64_t address : {std::uint64_t{0x40}, Bench::device_base}) {
      Payload payload;
      payload.set_command(tlm::TLM_WRITE_COMMAND);
      payload.set_address(address);
      payload.set_data_ptr(reinterpret_cast<std::uint8_t*>(&value));
      payload.set_data_length(4);
      payload.set_streaming_width(4);
      payload.set_byte_enable_length(4);
      sc_core::sc_time delay;
      bench.cpu(0).socket->b_transport(payload, delay);
      CHECK(payload.is_response_ok());
      CHECK(bench.cpu(0).read(address) == 0x1234);
    }
  });
}

// ---- Targets that break the protocol

namespace {

// The report of a simulation in which the memory answers a fetch as `answer` does and then `later` happens.
std::string misuse(
    const std::function<tlm::tlm_sync_enum(Bench&, Payload&, tlm::tlm_phase&, sc_core::sc_time&)>& answer,
    const std::function<void(Bench&, Payload&)>& later = [](Bench&, Payload&) {}) {
  Bench bench(load_table("msi"));
  Payload* seen = nullptr;
  bench.memory.answer = [&](Payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time) {
    payload.acquire();
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    seen = &payload;
    return answer(bench, payload, phase, time);
  };
  return reported([&] {
    simulate([&] {
      sc_core::sc_spawn([&] { bench.cpu(0).read(0x40); });
      sc_core::wait(ns(30));
      later(bench, *seen);
      settle();
    });
  });
}

void back(Bench& bench, Payload& payload, tlm::tlm_phase phase,
          const sc_core::sc_time& time = sc_core::SC_ZERO_TIME) {
  sc_core::sc_time annotated = time;
  bench.memory.target_socket->nb_transport_bw(payload, phase, annotated);
}

void check_named(const std::string& report) {
  CHECK(report.find("/earshot/bus/protocol: bus.memory") == 0);
  CHECK(report.find("the target of window 'memory'") != std::string::npos);
}

constexpr auto accepts = [](Bench&, Payload&, tlm::tlm_phase&, sc_core::sc_time&) {
  return tlm::TLM_ACCEPTED;
};

}  // namespace

TEST_CASE("a target that answers TLM_UPDATED with a phase of the initiator's is reported", "[bus]") {
  check_named(misuse([](Bench&, Payload&, tlm::tlm_phase& phase, sc_core::sc_time&) {
    phase = tlm::END_RESP;
    return tlm::TLM_UPDATED;
  }));
}
TEST_CASE("a target that sends a phase of the initiator's is reported", "[bus]") {
  check_named(misuse(accepts, [](Bench& bench, Payload& payload) { back(bench, payload, tlm::BEGIN_REQ); }));
}
TEST_CASE("a target that sends END_REQ twice is reported", "[bus]") {
  check_named(misuse(accepts, [](Bench& bench, Payload& payload) {
    back(bench, payload, tlm::END_REQ);
    back(bench, payload, tlm::END_REQ);
  }));
}
TEST_CASE("a target that sends END_REQ after it was due with a time is reported", "[bus]") {
  check_named(misuse(
      [](Bench&, Payload&, tlm::tlm_phase& phase, sc_core::sc_time& time) {
        phase = tlm::END_REQ;
        time += ns(200);
        return tlm::TLM_UPDATED;
      },
      [](Bench& bench, Payload& payload) { back(bench, payload, tlm::END_REQ); }));
}
TEST_CASE("a target that sends END_REQ after its response is reported", "[bus]") {
  check_named(misuse(accepts, [](Bench& bench, Payload& payload) {
    back(bench, payload, tlm::BEGIN_RESP);
    back(bench, payload, tlm::END_REQ);
  }));
}
TEST_CASE("a target that responds twice is reported", "[bus]") {
  check_named(misuse(accepts, [](Bench& bench, Payload& payload) {
    back(bench, payload, tlm::BEGIN_RESP, ns(20));
    back(bench, payload, tlm::BEGIN_RESP);
  }));
}
TEST_CASE("a target that responds to an access it has completed is reported", "[bus]") {
  check_named(misuse(
      [](Bench&, Payload&, tlm::tlm_phase&, sc_core::sc_time& time) {
        time += ns(100);
        return tlm::TLM_COMPLETED;
      },
      [](Bench& bench, Payload& payload) { back(bench, payload, tlm::BEGIN_RESP); }));
}
TEST_CASE("a target that responds within the call and then also completes is reported", "[bus]") {
  check_named(misuse([](Bench& bench, Payload& payload, tlm::tlm_phase&, sc_core::sc_time&) {
    back(bench, payload, tlm::BEGIN_RESP);
    return tlm::TLM_COMPLETED;
  }));
}
TEST_CASE("a target that responds within the call and then also ends the request is reported", "[bus]") {
  check_named(misuse([](Bench& bench, Payload& payload, tlm::tlm_phase& phase, sc_core::sc_time&) {
    back(bench, payload, tlm::BEGIN_RESP);
    phase = tlm::END_REQ;
    return tlm::TLM_UPDATED;
  }));
}
TEST_CASE("a target that responds again before the END_RESP of a response on the return path is reported",
          "[bus]") {
  check_named(misuse(
      [](Bench&, Payload&, tlm::tlm_phase& phase, sc_core::sc_time& time) {
        phase = tlm::BEGIN_RESP;
        time += ns(100);
        return tlm::TLM_UPDATED;
      },
      [](Bench& bench, Payload& payload) { back(bench, payload, tlm::BEGIN_RESP); }));
}
TEST_CASE("a target that responds to something it was never sent is reported", "[bus]") {
  check_named(misuse(accepts, [](Bench& bench, Payload&) {
    Payload stray;
    back(bench, stray, tlm::BEGIN_RESP);
  }));
}
TEST_CASE("a target that forgets to set a response is an error to the initiator, not a success", "[bus]") {
  Bench bench(load_table("msi"));
  bench.memory.answer = [&](Payload&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_COMPLETED; };
  simulate([&] {
    bench.cpu(0).read(0x40);
    CHECK(bench.cpu(0).status != tlm::TLM_OK_RESPONSE);
    CHECK(bench.states(0x40) == "I I");
  });
}

DECLARE_EXTENDED_PHASE(target_remark);

TEST_CASE("a phase of the target's own is ignored: 15.2.5, ignorable phases", "[bus]") {
  CHECK(misuse(accepts, [](Bench& bench, Payload& payload) {
          back(bench, payload, target_remark);
          back(bench, payload, tlm::BEGIN_RESP);
        }) == "");
}

// ---- Targets that never answer

TEST_CASE(
    "a memory that never answers is reported after the limit, with every queue and what its head waits for",
    "[bus]") {
  BenchOptions options;
  options.caches = 4;
  options.bus.stall_cycles = 100;
  options.bus.outstanding = 2;
  options.cache.misses = 1;
  Bench bench(load_table("msi"), options);
  bench.memory.hold = true;
  bench.memory.end_requests = false;
  const std::string text = reported([&] {
    simulate([&] {
      for (int i = 0; i < 4; ++i)
        sc_core::sc_spawn([&bench, i] { bench.cpu(i).read(0x100 * (static_cast<unsigned>(i / 2) + 1)); });
      sc_core::sc_spawn([&bench] {
        sc_core::wait(ns(3));
        bench.cpu(3).read(0x500);
      });
      sc_core::wait(ns(10000));
    });
  });
  CHECK(sc_core::sc_time_stamp() == ns(1 + 500));  // 100 cycles after the first request
  const auto says = [&](const std::string& line) {
    INFO(text);
    CHECK(text.find(line) != std::string::npos);
  };
  CHECK(text.find(stall_id) == 0);
  says("bus: nothing has completed for 100 bus cycles, at 501 ns");
  says("read of port 0, line 0x100, granted at 10 ns, waits for memory since 10 ns");
  says("read of port 2, line 0x200, granted at 15 ns, waits for memory since 15 ns");
  says("request of port 1, line 0x100 asked for at 1 ns, waits for the transaction before it to end");
  says("request of port 3, line 0x200 asked for at 1 ns, waits for the transaction before it to end");
  says("window memory: read of 32 bytes at 0x100 waits for the target to end its request phase (END_REQ)");
  says("window memory: read of 32 bytes at 0x200 queues for the target's request phase");
  says("cache0: miss to line 0x100");
  says("cache3: access to line 0x500 since 4 ns waits for a place: every miss is in use");
}

TEST_CASE("no stall is reported while anything completes, nor when nothing is outstanding", "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 100;  // 500 ns
  Bench bench(load_table("msi"), options);
  bench.memory.latency = ns(440);  // a miss takes 480: less than the limit
  CHECK(reported([&] {
          simulate([&] {
            for (unsigned n = 0; n < 50; ++n) bench.cpu(0).read(n * 0x20);
            sc_core::wait(ns(100000));
            for (unsigned n = 0; n < 50; ++n) {
              bench.cpu(1).read(n * 0x20);
              sc_core::wait(ns(n * 37));
            }
          });
        }) == "");
}

TEST_CASE("a stall is reported at most two limits after the last completion, and not before one", "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 100;
  Bench bench(load_table("msi"), options);
  Picoseconds last = 0;
  reported([&] {
    simulate([&] {
      for (unsigned n = 0; n < 23; ++n) {
        bench.cpu(0).read(n * 0x20);
        sc_core::wait(ns(n));
      }
      last = now_ps();
      bench.memory.hold = true;
      bench.cpu(0).read(0x1000);
    });
  });
  CHECK(now_ps() >= last + ps(500));
  CHECK(now_ps() <= last + ps(1000));
}

TEST_CASE("a device that never answers is reported too, and a memory that never takes a supplied line",
          "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 100;
  BoxedBench device("device", load_table("msi"), options), memory("memory", load_table("msi"), options);
  static std::string text;  // of the last report, which does not end the simulation
  sc_core::sc_report_handler::set_handler([](const sc_core::sc_report& report, const sc_core::sc_actions&) {
    if (report.get_severity() == sc_core::SC_ERROR) text = report.get_msg();
  });
  simulate([&] {
    device.bench.device.hold = true;
    sc_core::sc_spawn([&] { device.bench.cpu(0).read(Bench::device_base + 4); });
    sc_core::wait(ns(700));
    CHECK(text.find("device.bus: nothing has completed") == 0);
    CHECK(text.find("io-read of port 0") != std::string::npos);
    CHECK(text.find("window device: read of 4 bytes at 0x4 waits for the target's response (BEGIN_RESP)") !=
          std::string::npos);
    text.clear();
    device.bench.device.respond();
    sc_core::wait(ns(2000));
    CHECK(text == "");
    memory.bench.cpu(0).write(0x40, 1);
    settle();
    memory.bench.memory.hold = true;
    memory.bench.cpu(1).read(0x40);
    sc_core::wait(ns(1200));
    CHECK(text.find("memory.bus: nothing has completed") == 0);
    CHECK(text.find("waits for memory to take the supplied line") != std::string::npos);
  });
}

TEST_CASE("stall cycles of 0: never", "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 0;
  Bench bench(load_table("msi"), options);
  bench.memory.hold = true;
  CHECK(reported([&] {
          simulate([&] {
            sc_core::sc_spawn([&] { bench.cpu(0).read(0x40); });
            sc_core::wait(sc_core::sc_time(1, sc_core::SC_SEC));
          });
        }) == "");
  CHECK(bench.bus->waiting() != "");
}

TEST_CASE("an idle platform costs no events: nothing is pending once everything has ended", "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 0;
  Bench bench(load_table("mesi"), options);
  sc_core::sc_time last;
  sc_core::sc_spawn([&] {
    for (unsigned n = 0; n < 20; ++n) {
      bench.cpu(0).write(n * 0x20, n);
      bench.cpu(1).read(n * 0x20);
      bench.cpu(1).write(Bench::device_base, n);
    }
    sc_core::wait(ns(1000));
    bench.flush();
    last = sc_core::sc_time_stamp();
  });
  sc_core::sc_start();
  CHECK(bench.bus->waiting() == "");
  CHECK(last != sc_core::SC_ZERO_TIME);
  CHECK(sc_core::sc_time_stamp() == last);
  CHECK_FALSE(sc_core::sc_pending_activity());
}

TEST_CASE(
    "a watched platform that is idle has only the watch of the last busy time pending, and then nothing",
    "[bus]") {
  BenchOptions options;
  options.bus.stall_cycles = 1000;
  Bench bench(load_table("mesi"), options);
  sc_core::sc_spawn([&] { bench.cpu(0).read(0x20); });
  sc_core::sc_start();
  CHECK(sc_core::sc_time_stamp() <= ns(1 + 5000));
}

TEST_CASE("waiting() names what an initiator that never ends its response holds up", "[bus]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    bench.cpu(0).on_response = [](Requester::Access&, tlm::tlm_phase&, sc_core::sc_time&) {
      return tlm::TLM_ACCEPTED;
    };
    bench.cpu(0).send_read("a", 0x40);
    settle();
    CHECK(bench.bus->waiting().find("END_RESP") != std::string::npos);
  });
}
