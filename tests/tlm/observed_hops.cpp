// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The observer as a module: it passes everything on, at every width, and what it says of a target that breaks
// a rule reaches the test.
#include <catch2/catch.hpp>

#include "simulated.h"
#include "tlm/base_protocol_observer.h"

using namespace earshot;
using namespace earshot::test;

namespace {

// Forgets the response status, and invalidates direct memory when told to.
template <unsigned BUSWIDTH>
class Target : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<Target, BUSWIDTH> socket{"socket"};
  explicit Target(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_b_transport(this, &Target::b_transport);
    socket.register_get_direct_mem_ptr(this, &Target::get_direct_mem_ptr);
    socket.register_transport_dbg(this, &Target::transport_dbg);
  }
  bool forgets = false;

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
    *payload.get_data_ptr() = 42;
    delay += sc_core::sc_time(3, sc_core::SC_NS);
    if (!forgets) payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  bool get_direct_mem_ptr(tlm::tlm_generic_payload&, tlm::tlm_dmi& dmi) {
    dmi.allow_read_write();
    dmi.set_start_address(0);
    dmi.set_end_address(99);
    return true;
  }
  unsigned transport_dbg(tlm::tlm_generic_payload&) { return 1; }
};

template <unsigned BUSWIDTH>
class Source : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Source, BUSWIDTH> socket{"socket"};
  explicit Source(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_invalidate_direct_mem_ptr(this, &Source::invalidated);
  }
  std::uint64_t last = 0;

 private:
  void invalidated(sc_dt::uint64, sc_dt::uint64 end) { last = end; }
};

template <unsigned BUSWIDTH>
void pass_everything_on() {
  Source<BUSWIDTH> source("source");
  Target<BUSWIDTH> target("target");
  BaseProtocolObserver<BUSWIDTH> observer("observer", "source");
  source.socket.bind(observer.target_socket);
  observer.initiator_socket.bind(target.socket);
  int heard = 0;
  observer.on_access = [&](const tlm::tlm_generic_payload&, bool) { ++heard; };
  simulate([&] {
    unsigned char byte = 0;
    tlm::tlm_generic_payload payload;
    payload.set_read();
    payload.set_data_ptr(&byte);
    payload.set_data_length(1);
    payload.set_streaming_width(1);
    sc_core::sc_time delay(1, sc_core::SC_NS);
    source.socket->b_transport(payload, delay);
    CHECK(byte == 42);
    CHECK(delay == sc_core::sc_time(4, sc_core::SC_NS));
    tlm::tlm_dmi dmi;
    CHECK(source.socket->get_direct_mem_ptr(payload, dmi));
    CHECK(dmi.get_end_address() == 99);
    CHECK(source.socket->transport_dbg(payload) == 1);
    target.socket->invalidate_direct_mem_ptr(0, 77);
    CHECK(source.last == 77);
    CHECK(observer.rules().broken().empty());

    target.forgets = true;
    payload.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    source.socket->b_transport(payload, delay);
  });
  CHECK(heard == 4);
  REQUIRE(observer.rules().broken().size() == 1);
  CHECK(observer.rules().broken().front().rule == Rule::status_at_response);
}

}  // namespace

TEST_CASE("an observer on a 32-bit hop passes everything on and tells what is broken") {
  pass_everything_on<32>();
}
TEST_CASE("an observer on a 64-bit hop passes everything on and tells what is broken") {
  pass_everything_on<64>();
}
TEST_CASE("an observer on a 128-bit hop passes everything on and tells what is broken") {
  pass_everything_on<128>();
}
