// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Initiators that break the base protocol (IEEE 1666-2011, 15.2) towards a cache in arbitrated timing: each
// error is reported with the initiator's name.
#include <catch2/catch.hpp>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

using Access = Requester::Access;

// What SC_REPORT_ERROR says while `body` runs; empty if nothing.
std::string reported(const std::function<void()>& body) {
  try {
    body();
  } catch (const sc_core::sc_report& report) {
    return std::string(report.get_msg_type()) + ": " + report.get_msg();
  }
  return "";
}

}  // namespace

TEST_CASE("BEGIN_REQ before the last request has ended is reported with the initiator's name", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    bench.cpu(0).send_read("a", 0x40);
    const std::string text = reported([&] { bench.cpu(0).send_read("b", 0x80); });
    CHECK(text.find("/earshot/cache/protocol: cache0") == 0);
    CHECK(text.find("cpu0.socket") != std::string::npos);
    CHECK(text.find("BEGIN_REQ before the END_REQ") != std::string::npos);
  });
}

TEST_CASE("BEGIN_REQ of a payload in flight is reported", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Access& access = bench.cpu(1).send_read("a", 0x40);
    sc_core::wait(ns(10));  // its request has ended
    const std::string text = reported([&] { bench.cpu(1).begin(access); });
    CHECK(text.find("/earshot/cache/protocol: cache1") == 0);
    CHECK(text.find("cpu1.socket") != std::string::npos);
    CHECK(text.find("still in flight") != std::string::npos);
  });
}

TEST_CASE("END_RESP without BEGIN_RESP, for another access, or twice, is reported", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_ACCEPTED; };
    Access& a = cpu.send_read("a", 0x40);
    const auto end = [&](Access& access, const sc_core::sc_time& time = sc_core::SC_ZERO_TIME) {
      return reported([&] { cpu.phase(access, tlm::END_RESP, time); });
    };
    const std::string expected = "END_RESP for an access that has no BEGIN_RESP outstanding";
    CHECK(end(a).find(expected) != std::string::npos);
    sc_core::wait(ns(10));
    Access& b = cpu.send_read("b", 0x80);
    sc_core::wait(ns(200));
    REQUIRE(cpu.heard == "a END_REQ, b END_REQ, a BEGIN_RESP");
    CHECK(end(b).find(expected) != std::string::npos);
    CHECK(end(a, ns(5)) == "");
    CHECK(end(a, ns(5)).find(expected) != std::string::npos);  // it has ended, if only in 5 ns
    settle();
    CHECK(end(a).find("cpu0.socket") != std::string::npos);
    CHECK(end(b) == "");
    CHECK(end(b).find(expected) != std::string::npos);
  });
}

TEST_CASE("END_RESP after a response that was completed with a time is reported", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Requester& cpu = bench.cpu(0);
    cpu.on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time& time) {
      time = ns(50);
      return tlm::TLM_COMPLETED;
    };
    Access& a = cpu.send_read("a", 0x40);
    sc_core::wait(ns(110));
    CHECK(reported([&] { cpu.phase(a, tlm::END_RESP); }).find("no BEGIN_RESP outstanding") !=
          std::string::npos);
    settle();
    CHECK(bench.cache(0).totals().reads == 1);
  });
}

TEST_CASE("an initiator that sends a target's phase is reported", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Access& access = bench.cpu(0).send_read("a", 0x40);
    for (const auto& phase : {tlm::END_REQ, tlm::BEGIN_RESP}) {
      const std::string text = reported([&] { bench.cpu(0).phase(access, phase); });
      CHECK(text.find("expected BEGIN_REQ or END_RESP") != std::string::npos);
      CHECK(text.find("cpu0.socket") != std::string::npos);
    }
  });
}

TEST_CASE("an initiator that answers BEGIN_RESP with a phase other than END_RESP is reported", "[cache]") {
  Bench bench(load_table("msi"));
  bench.cpu(0).on_response = [](Access&, tlm::tlm_phase&, sc_core::sc_time&) { return tlm::TLM_UPDATED; };
  const std::string text = reported([&] {
    simulate([&] {
      bench.cpu(0).send_read("a", 0x40);
      settle();
    });
  });
  CHECK(text.find("TLM_UPDATED") != std::string::npos);
  CHECK(text.find("cpu0.socket") != std::string::npos);
}

TEST_CASE("an initiator that answers END_REQ with anything but TLM_ACCEPTED is reported", "[cache]") {
  Bench bench(load_table("msi"));
  bench.cpu(0).on_end_request = [](Access&) { return tlm::TLM_COMPLETED; };
  const std::string text = reported([&] {
    simulate([&] {
      bench.cpu(0).send_read("a", 0x40);
      settle();
    });
  });
  CHECK(text.find("/earshot/cache/protocol") == 0);
  CHECK(text.find("cpu0.socket") != std::string::npos);
}

DECLARE_EXTENDED_PHASE(internal_remark);

TEST_CASE("a phase of the initiator's own is ignored: 15.2.5, ignorable phases", "[cache]") {
  Bench bench(load_table("msi"));
  simulate([&] {
    Access& access = bench.cpu(0).send_read("a", 0x40);
    CHECK(reported([&] { CHECK(bench.cpu(0).phase(access, internal_remark) == tlm::TLM_ACCEPTED); }) == "");
    settle();
    CHECK(bench.cpu(0).heard == "a END_REQ, a BEGIN_RESP");
  });
}
