// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Every rule of the base-protocol observer, kept and broken: what keeps the rules is met with silence, and
// each rule has a case that breaks it and nothing else.
#include <array>
#include <catch2/catch.hpp>
#include <set>
#include <string>

#include "tlm/base_protocol_rules.h"

using earshot::test::BaseProtocolRules;
using earshot::test::Rule;
using earshot::test::rules;
using earshot::test::Side;

namespace {

DECLARE_EXTENDED_PHASE(extra);

struct Pool : tlm::tlm_mm_interface {
  void free(tlm::tlm_generic_payload*) override {}
};

struct Payload : tlm::tlm_generic_payload {
  explicit Payload(tlm::tlm_command command, std::uint64_t address = 0x40) : tlm_generic_payload(&pool) {
    set_command(command);
    set_address(address);
    set_data_ptr(data.data());
    set_data_length(8);
    set_streaming_width(8);
    acquire();
  }
  ~Payload() override { release(); }
  static Pool pool;
  std::array<unsigned char, 8> data{};
  std::array<unsigned char, 4> enables{0xff, 0, 0xff, 0};
};
Pool Payload::pool;

// One hop, and the calls over it.
struct Hop {
  BaseProtocolRules book{"cpu0"};
  Payload read{tlm::TLM_READ_COMMAND}, write{tlm::TLM_WRITE_COMMAND, 0x80};
  BaseProtocolRules::Instant at{1000, 0, 7};
  BaseProtocolRules::Instant returned{1000, 0, 7};
  tlm::tlm_phase answer = tlm::UNINITIALIZED_PHASE;  // the phase on return; the call's if not set

  void forward(Payload& payload, tlm::tlm_phase phase, tlm::tlm_sync_enum status = tlm::TLM_ACCEPTED) {
    const auto call = book.forward(payload, phase, at);
    book.forward_returns(call, payload, status, answer == tlm::UNINITIALIZED_PHASE ? phase : answer,
                         returned);
  }
  void backward(Payload& payload, tlm::tlm_phase phase, tlm::tlm_sync_enum status = tlm::TLM_ACCEPTED) {
    if (phase == tlm::BEGIN_RESP) payload.set_response_status(tlm::TLM_OK_RESPONSE);
    const auto call = book.backward(payload, phase, at);
    book.backward_returns(call, payload, status, answer == tlm::UNINITIALIZED_PHASE ? phase : answer,
                          returned);
  }
  void blocking(Payload& payload, tlm::tlm_response_status status = tlm::TLM_OK_RESPONSE) {
    const auto call = book.blocking(payload, at);
    payload.set_response_status(status);
    book.blocking_returns(call, payload, returned);
  }
  // Exactly this, once.
  bool only(Rule rule, Side by) const {
    for (const auto& broken : book.broken()) UNSCOPED_INFO(broken.text);
    return book.broken().size() == 1 && book.broken().front().rule == rule &&
           book.broken().front().by == by && book.count(rule, by) == 1;
  }
  bool silent() const {
    for (const auto& broken : book.broken()) UNSCOPED_INFO(broken.text);
    return book.broken().empty();
  }
};

}  // namespace

TEST_CASE("the observer is silent about everything the base protocol allows") {
  Hop hop;
  SECTION("four phases on both paths") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::END_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP);
    hop.forward(hop.read, tlm::END_RESP, tlm::TLM_COMPLETED);
  }
  SECTION("END_REQ and END_RESP by return") {
    hop.answer = tlm::END_REQ;
    hop.forward(hop.read, tlm::BEGIN_REQ, tlm::TLM_UPDATED);
    hop.answer = tlm::END_RESP;
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_UPDATED);
  }
  SECTION("BEGIN_RESP by return, ended later") {
    const auto call = hop.book.forward(hop.read, tlm::BEGIN_REQ, hop.at);
    hop.read.set_response_status(tlm::TLM_OK_RESPONSE);
    hop.book.forward_returns(call, hop.read, tlm::TLM_UPDATED, tlm::BEGIN_RESP, hop.returned);
    hop.forward(hop.read, tlm::END_RESP);
  }
  SECTION("END_REQ left out") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
  }
  SECTION("completed at once, with a delay") {
    const auto call = hop.book.forward(hop.read, tlm::BEGIN_REQ, hop.at);
    hop.read.set_response_status(tlm::TLM_ADDRESS_ERROR_RESPONSE);
    hop.returned.delay = 50;
    hop.book.forward_returns(call, hop.read, tlm::TLM_COMPLETED, tlm::END_REQ, hop.returned);
  }
  SECTION("b_transport that waits, and consumes the delay") {
    hop.at.delay = 500;
    hop.returned = {1500, 0, 99};
    hop.blocking(hop.write);
  }
  SECTION("two in flight, answered out of order; the address translated on the way") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::END_REQ);
    hop.forward(hop.write, tlm::BEGIN_REQ);
    hop.backward(hop.write, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
    hop.read.set_address(0);
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
  }
  SECTION("a phase of somebody else's") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.forward(hop.read, extra);
    hop.backward(hop.read, extra);
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
  }
  SECTION("nothing to do, without data") {
    hop.read.set_command(tlm::TLM_IGNORE_COMMAND);
    hop.read.set_data_ptr(nullptr);
    hop.read.set_data_length(0);
    hop.blocking(hop.read, tlm::TLM_INCOMPLETE_RESPONSE);
  }
  SECTION("a read that writes its enabled bytes") {
    hop.read.set_byte_enable_ptr(hop.read.enables.data());
    hop.read.set_byte_enable_length(4);
    const auto call = hop.book.blocking(hop.read, hop.at);
    hop.read.data[0] = hop.read.data[2] = hop.read.data[4] = 9;
    hop.read.set_response_status(tlm::TLM_OK_RESPONSE);
    hop.book.blocking_returns(call, hop.read, hop.returned);
  }
  SECTION("direct memory and debug") {
    tlm::tlm_dmi dmi;
    dmi.set_start_address(0);
    dmi.set_end_address(0xff);
    dmi.allow_read_write();
    hop.book.direct_memory_returns(hop.book.direct_memory(hop.read, hop.at), hop.read, true, dmi,
                                   hop.returned);
    dmi.init();
    hop.book.direct_memory_returns(hop.book.direct_memory(hop.write, hop.at), hop.write, false, dmi,
                                   hop.returned);
    hop.book.invalidation(0x10, 0x10);
    hop.book.debug_returns(hop.book.debug(hop.write, hop.at), hop.write, 8, hop.returned);
  }
  CHECK(hop.silent());
  CHECK(hop.book.in_flight() == 0);
}

TEST_CASE("the observer sees a phase that may not come next") {
  Hop hop;
  SECTION("END_RESP before the response") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.forward(hop.read, tlm::END_RESP);
    CHECK(hop.only(Rule::phase_order, Side::initiator));
  }
  SECTION("END_RESP of no transaction") {
    hop.forward(hop.read, tlm::END_RESP);
    CHECK(hop.only(Rule::phase_order, Side::initiator));
  }
  SECTION("BEGIN_RESP on the forward path") {
    hop.forward(hop.read, tlm::BEGIN_RESP);
    CHECK(hop.only(Rule::phase_order, Side::initiator));
  }
  SECTION("END_REQ twice") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::END_REQ);
    hop.backward(hop.read, tlm::END_REQ);
    CHECK(hop.only(Rule::phase_order, Side::target));
  }
  SECTION("BEGIN_RESP twice") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP);
    hop.backward(hop.read, tlm::BEGIN_RESP);
    CHECK(hop.only(Rule::phase_order, Side::target));
  }
  SECTION("END_RESP on the backward path") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::END_RESP);
    CHECK(hop.only(Rule::phase_order, Side::target));
  }
}

TEST_CASE("the observer sees a return that may not answer its phase") {
  Hop hop;
  SECTION("an update that updates nothing") {
    hop.forward(hop.read, tlm::BEGIN_REQ, tlm::TLM_UPDATED);
    CHECK(hop.only(Rule::return_status, Side::target));
  }
  SECTION("END_RESP updated") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP);
    hop.forward(hop.read, tlm::END_RESP, tlm::TLM_UPDATED);
    CHECK(hop.only(Rule::return_status, Side::target));
  }
  SECTION("END_REQ completed") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::END_REQ, tlm::TLM_COMPLETED);
    CHECK(hop.only(Rule::return_status, Side::initiator));
  }
  SECTION("BEGIN_RESP updated to something else") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_UPDATED);
    CHECK(hop.only(Rule::return_status, Side::initiator));
  }
}

TEST_CASE("the observer sees TLM_ACCEPTED with something changed") {
  Hop hop;
  SECTION("the phase") {
    hop.answer = tlm::END_REQ;
    hop.forward(hop.read, tlm::BEGIN_REQ);
    CHECK(hop.only(Rule::accepted_unchanged, Side::target));
  }
  SECTION("the time") {
    hop.returned.delay = 5;
    hop.forward(hop.read, tlm::BEGIN_REQ);
    CHECK(hop.only(Rule::accepted_unchanged, Side::target));
  }
  SECTION("the response status") {
    const auto call = hop.book.forward(hop.read, tlm::BEGIN_REQ, hop.at);
    hop.read.set_response_status(tlm::TLM_OK_RESPONSE);
    hop.book.forward_returns(call, hop.read, tlm::TLM_ACCEPTED, tlm::BEGIN_REQ, hop.returned);
    CHECK(hop.only(Rule::accepted_unchanged, Side::target));
  }
  SECTION("by the initiator") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.returned.delay = 5;
    hop.backward(hop.read, tlm::END_REQ);
    CHECK(hop.only(Rule::accepted_unchanged, Side::initiator));
  }
}

TEST_CASE("the observer sees a request before the one before it has ended") {
  Hop hop;
  hop.forward(hop.read, tlm::BEGIN_REQ);
  hop.forward(hop.write, tlm::BEGIN_REQ);
  CHECK(hop.only(Rule::request_exclusion, Side::initiator));
}

TEST_CASE("the observer sees a response before the one before it has ended") {
  Hop hop;
  hop.forward(hop.read, tlm::BEGIN_REQ);
  hop.backward(hop.read, tlm::BEGIN_RESP);
  hop.forward(hop.write, tlm::BEGIN_REQ);
  hop.backward(hop.write, tlm::BEGIN_RESP);
  CHECK(hop.only(Rule::response_exclusion, Side::target));
}

TEST_CASE("the observer sees a payload used again too early") {
  Hop hop;
  hop.forward(hop.read, tlm::BEGIN_REQ);
  SECTION("by nb_transport") {
    hop.backward(hop.read, tlm::END_REQ);
    hop.forward(hop.read, tlm::BEGIN_REQ);
  }
  SECTION("by b_transport") {
    hop.blocking(hop.read);
  }
  CHECK(hop.only(Rule::payload_in_use, Side::initiator));
}

TEST_CASE("the observer sees an answer to nothing") {
  Hop hop;
  hop.backward(hop.read, tlm::BEGIN_RESP);
  CHECK(hop.only(Rule::unknown_payload, Side::target));
}

TEST_CASE("the observer sees a call on the other path from within a call") {
  Hop hop;
  SECTION("backward within forward") {
    const auto call = hop.book.forward(hop.read, tlm::BEGIN_REQ, hop.at);
    hop.backward(hop.read, tlm::END_REQ);
    hop.book.forward_returns(call, hop.read, tlm::TLM_ACCEPTED, tlm::BEGIN_REQ, hop.returned);
    CHECK(hop.only(Rule::nested_paths, Side::target));
  }
  SECTION("backward within forward of another hop") {
    Hop upstream;
    hop.forward(hop.read, tlm::BEGIN_REQ);
    const auto call = upstream.book.forward(upstream.read, tlm::BEGIN_REQ, hop.at);
    hop.backward(hop.read, tlm::END_REQ);
    upstream.book.forward_returns(call, upstream.read, tlm::TLM_ACCEPTED, tlm::BEGIN_REQ, hop.returned);
    CHECK(upstream.silent());
    CHECK(hop.only(Rule::nested_paths, Side::target));
  }
  SECTION("forward within backward") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    const auto call = hop.book.backward(hop.read, tlm::END_REQ, hop.at);
    hop.forward(hop.write, tlm::BEGIN_REQ);
    hop.book.backward_returns(call, hop.read, tlm::TLM_ACCEPTED, tlm::END_REQ, hop.returned);
    CHECK(hop.only(Rule::nested_paths, Side::initiator));
  }
}

TEST_CASE("the observer sees a wait where none may be") {
  Hop hop;
  hop.returned.delta = 8;
  SECTION("in nb_transport_fw") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
  }
  SECTION("in transport_dbg") {
    hop.book.debug_returns(hop.book.debug(hop.write, hop.at), hop.write, 8, hop.returned);
  }
  SECTION("in get_direct_mem_ptr") {
    hop.book.direct_memory_returns(hop.book.direct_memory(hop.write, hop.at), hop.write, false, {},
                                   hop.returned);
  }
  CHECK(hop.only(Rule::non_blocking_waits, Side::target));
}

TEST_CASE("the observer sees b_transport called from within nb_transport, on another hop too") {
  Hop hop, downstream;
  const auto call = hop.book.forward(hop.read, tlm::BEGIN_REQ, hop.at);
  downstream.blocking(downstream.read);
  hop.book.forward_returns(call, hop.read, tlm::TLM_ACCEPTED, tlm::BEGIN_REQ, hop.returned);
  CHECK(hop.silent());
  CHECK(downstream.only(Rule::non_blocking_blocks, Side::initiator));
  downstream.read.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  downstream.blocking(downstream.read);
  CHECK(downstream.only(Rule::non_blocking_blocks, Side::initiator));
}

TEST_CASE("the observer sees a target that changes what is the initiator's") {
  Hop hop;
  const auto call = hop.book.blocking(hop.read, hop.at);
  hop.read.set_response_status(tlm::TLM_OK_RESPONSE);
  SECTION("the command") {
    hop.read.set_command(tlm::TLM_WRITE_COMMAND);
  }
  SECTION("the data pointer") {
    hop.read.set_data_ptr(hop.write.data.data());
  }
  SECTION("the data length") {
    hop.read.set_data_length(4);
  }
  SECTION("the byte enable pointer") {
    hop.read.set_byte_enable_ptr(hop.read.enables.data());
  }
  SECTION("the byte enable length") {
    hop.read.set_byte_enable_length(3);
  }
  SECTION("the streaming width") {
    hop.read.set_streaming_width(4);
  }
  hop.book.blocking_returns(call, hop.read, hop.returned);
  CHECK(hop.only(Rule::attributes, Side::target));
}

TEST_CASE("the observer sees data to write, byte enables and disabled bytes overwritten") {
  Hop hop;
  Payload& payload = GENERATE(0, 1) == 0 ? hop.read : hop.write;
  payload.set_byte_enable_ptr(payload.enables.data());
  payload.set_byte_enable_length(4);
  const auto call = hop.book.blocking(payload, hop.at);
  payload.set_response_status(tlm::TLM_OK_RESPONSE);
  SECTION("a byte enable") {
    payload.enables[1] = 0xff;
    hop.book.blocking_returns(call, payload, hop.returned);
    CHECK(hop.only(Rule::byte_enables, Side::target));
  }
  SECTION("a byte of the data that is disabled") {
    payload.data[5] = 1;
    hop.book.blocking_returns(call, payload, hop.returned);
    CHECK(hop.only(payload.is_read() ? Rule::disabled_bytes : Rule::write_data, Side::target));
  }
}

TEST_CASE("the observer sees a response status at the wrong time") {
  Hop hop;
  SECTION("set before the request") {
    hop.read.set_response_status(tlm::TLM_OK_RESPONSE);
    hop.blocking(hop.read);
    CHECK(hop.only(Rule::status_at_request, Side::initiator));
  }
  SECTION("never set, b_transport") {
    hop.blocking(hop.read, tlm::TLM_INCOMPLETE_RESPONSE);
    CHECK(hop.only(Rule::status_at_response, Side::target));
  }
  SECTION("never set, completed at once") {
    hop.forward(hop.read, tlm::BEGIN_REQ, tlm::TLM_COMPLETED);
    CHECK(hop.only(Rule::status_at_response, Side::target));
  }
  SECTION("changed before END_RESP") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.backward(hop.read, tlm::BEGIN_RESP);
    hop.read.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    hop.forward(hop.read, tlm::END_RESP);
    CHECK(hop.only(Rule::status_kept, Side::initiator));
  }
}

TEST_CASE("the observer sees a malformed payload") {
  Hop hop;
  SECTION("no data") {
    hop.read.set_data_ptr(nullptr);
  }
  SECTION("no length") {
    hop.read.set_data_length(0);
  }
  SECTION("a streaming width of 0") {
    hop.read.set_streaming_width(0);
  }
  SECTION("a byte enable length of 0") {
    hop.read.set_byte_enable_ptr(hop.read.enables.data());
  }
  hop.blocking(hop.read);
  CHECK(hop.only(Rule::malformed, Side::initiator));
}

TEST_CASE("the observer sees a payload that nobody keeps") {
  Hop hop;
  tlm::tlm_generic_payload bare;
  bare.set_command(tlm::TLM_READ_COMMAND);
  bare.set_data_ptr(hop.read.data.data());
  bare.set_data_length(4);
  bare.set_streaming_width(4);
  const auto call = hop.book.forward(bare, tlm::BEGIN_REQ, hop.at);
  hop.book.forward_returns(call, bare, tlm::TLM_ACCEPTED, tlm::BEGIN_REQ, hop.returned);
  CHECK(hop.only(Rule::no_memory_manager, Side::initiator));
}

TEST_CASE("the observer sees time run backwards") {
  Hop hop;
  SECTION("in b_transport") {
    hop.at.delay = 500;
    hop.returned = {1499, 0, 9};
    hop.blocking(hop.read);
    CHECK(hop.only(Rule::time_decreased, Side::target));
  }
  SECTION("in a return of nb_transport_fw") {
    hop.at.delay = 5;
    hop.answer = tlm::END_REQ;
    hop.forward(hop.read, tlm::BEGIN_REQ, tlm::TLM_UPDATED);
    CHECK(hop.book.count(Rule::time_decreased, Side::target) == 1);
  }
  SECTION("in a return of nb_transport_bw") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.at.delay = 5;
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
    CHECK(hop.only(Rule::time_decreased, Side::initiator));
  }
  SECTION("from one phase to the next") {
    hop.at.delay = hop.returned.delay = 300;
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.at = hop.returned = {1299, 0, 8};
    hop.backward(hop.read, tlm::BEGIN_RESP, tlm::TLM_COMPLETED);
    CHECK(hop.only(Rule::time_order, Side::target));
  }
  SECTION("from the response to its end") {
    hop.forward(hop.read, tlm::BEGIN_REQ);
    hop.at.delay = hop.returned.delay = 300;
    hop.backward(hop.read, tlm::BEGIN_RESP);
    hop.at = hop.returned = {1299, 0, 8};
    hop.forward(hop.read, tlm::END_RESP);
    CHECK(hop.only(Rule::time_order, Side::initiator));
  }
}

TEST_CASE("the observer sees direct memory granted or taken back wrongly") {
  Hop hop;
  tlm::tlm_dmi dmi;
  dmi.set_start_address(0);
  dmi.set_end_address(0xff);
  dmi.allow_read();
  SECTION("of another region") {
    dmi.set_end_address(0x3f);
    hop.book.direct_memory_returns(hop.book.direct_memory(hop.read, hop.at), hop.read, true, dmi,
                                   hop.returned);
    CHECK(hop.only(Rule::dmi_region, Side::target));
  }
  SECTION("for the other command") {
    hop.book.direct_memory_returns(hop.book.direct_memory(hop.write, hop.at), hop.write, true, dmi,
                                   hop.returned);
    CHECK(hop.only(Rule::dmi_region, Side::target));
  }
  SECTION("taken back from the end to the begin") {
    hop.book.invalidation(0x10, 0xf);
    CHECK(hop.only(Rule::dmi_invalidation, Side::target));
  }
}

TEST_CASE("the observer sees a debug access that does more than it was asked for") {
  Hop hop;
  hop.book.debug_returns(hop.book.debug(hop.read, hop.at), hop.read, 9, hop.returned);
  CHECK(hop.only(Rule::debug_count, Side::target));
}

TEST_CASE("what the observer says names rule, clause, hop and address") {
  Hop hop;
  hop.backward(hop.read, tlm::BEGIN_RESP);
  REQUIRE(hop.book.broken().size() == 1);
  CHECK(hop.book.broken().front().text ==
        "cpu0: the target breaks unknown-payload (IEEE 1666-2011, 15.2.4), read at 0x40: BEGIN_RESP of no "
        "transaction");
  std::set<std::string> names;
  for (int i = 0; i < rules; ++i) names.insert(earshot::test::name_of(static_cast<Rule>(i)));
  CHECK(names.size() == rules);
}
