// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Players against targets that answer in every manner the base protocol allows (IEEE 1666-2011, 15.2).
#include <catch2/catch.hpp>

#include <deque>
#include <random>

#include "dram/command_checker.h"
#include "earshot/dram/dram_controller.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/traffic/non_blocking_player.h"
#include "earshot/traffic/player.h"
#include "simulated.h"

using namespace earshot;

namespace {

// Yields `count` accesses: words in turn, every other one a write.
class Words : public AccessSource {
 public:
  explicit Words(std::uint64_t count) : count_(count) {}
  bool next(Access& access) override {
    if (done_ == count_) return false;
    access = Access();
    access.op = done_ % 2 == 0 ? AccessOp::write : AccessOp::read;
    access.size = 4;
    access.address = done_ / 2 * 4;
    access.has_value = access.op == AccessOp::write;
    access.value = done_ + 1;
    ++done_;
    return true;
  }

 private:
  std::uint64_t count_;
  std::uint64_t done_ = 0;
};

// Answers every request in one of the manners allowed, drawn at random, and checks the initiator's side.
class AnyManner : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<AnyManner> socket{"socket"};
  explicit AnyManner(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_fw(this, &AnyManner::forward);
    sc_core::sc_spawn([this] { requests(); }, "requests");
    sc_core::sc_spawn([this] { responses(); }, "responses");
  }

  std::vector<std::uint64_t> order;  // addresses, as requests began
  std::size_t most = 0;              // in flight at once
  unsigned wrong = 0;                // rules broken by the initiator

 private:
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                             sc_core::sc_time& time) {
    if (phase == tlm::END_RESP) {
      if (ending_ != &payload) ++wrong;
      finish(payload);
      ending_ = nullptr;
      return tlm::TLM_COMPLETED;
    }
    if (phase != tlm::BEGIN_REQ || requesting_ != nullptr || !payload.has_mm()) ++wrong;
    order.push_back(payload.get_address());
    most = std::max(most, ++in_flight_);
    payload.acquire();
    switch (random_() % 5) {
      case 0:  // completes early
        time += sc_core::sc_time(static_cast<double>(random_() % 20), sc_core::SC_NS);
        finish(payload);
        return tlm::TLM_COMPLETED;
      case 1:  // the request ends in the return path
        phase = tlm::END_REQ;
        time += sc_core::sc_time(static_cast<double>(random_() % 5), sc_core::SC_NS);
        waiting_.push_back(&payload);
        changed_.notify(sc_core::SC_ZERO_TIME);
        return tlm::TLM_UPDATED;
      case 2:  // the response begins in the return path: END_RESP follows
        if (ending_ != nullptr) break;
        phase = tlm::BEGIN_RESP;
        time += sc_core::sc_time(static_cast<double>(random_() % 20), sc_core::SC_NS);
        payload.set_response_status(tlm::TLM_OK_RESPONSE);
        ending_ = &payload;
        return tlm::TLM_UPDATED;
      default:
        break;
    }
    requesting_ = &payload;
    request_.notify(sc_core::sc_time(static_cast<double>(random_() % 30), sc_core::SC_NS));
    return tlm::TLM_ACCEPTED;
  }
  void requests() {
    for (;;) {
      sc_core::wait(request_);
      tlm::tlm_generic_payload* payload = requesting_;
      waiting_.push_back(payload);
      changed_.notify(sc_core::SC_ZERO_TIME);
      requesting_ = nullptr;
      if (random_() % 2 == 0) continue;  // END_REQ is implied by BEGIN_RESP
      tlm::tlm_phase phase = tlm::END_REQ;
      sc_core::sc_time time;
      socket->nb_transport_bw(*payload, phase, time);
    }
  }
  void responses() {
    for (;;) {
      while (waiting_.empty() || ending_ != nullptr) {
        if (waiting_.empty())
          sc_core::wait(changed_);
        else
          sc_core::wait(1, sc_core::SC_NS);
      }
      sc_core::wait(static_cast<double>(5 + random_() % 40),
                    sc_core::SC_NS);  // no response before its END_REQ
      if (ending_ != nullptr) continue;
      const std::size_t chosen = random_() % waiting_.size();  // responses overtake each other
      tlm::tlm_generic_payload* payload = waiting_[chosen];
      waiting_.erase(waiting_.begin() + static_cast<std::ptrdiff_t>(chosen));
      payload->set_response_status(tlm::TLM_OK_RESPONSE);
      tlm::tlm_phase phase = tlm::BEGIN_RESP;
      sc_core::sc_time time(random_() % 2 == 0 ? 0.0 : 3.0, sc_core::SC_NS);
      if (socket->nb_transport_bw(*payload, phase, time) != tlm::TLM_COMPLETED) ++wrong;
      finish(*payload);
    }
  }
  void finish(tlm::tlm_generic_payload& payload) {
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    --in_flight_;
    payload.release();
  }

  std::mt19937 random_{7};
  std::size_t in_flight_ = 0;
  tlm::tlm_generic_payload* requesting_ = nullptr;
  tlm::tlm_generic_payload* ending_ = nullptr;
  std::vector<tlm::tlm_generic_payload*> waiting_;
  sc_core::sc_event request_, changed_;
};

// Takes every request at once and serves them in turn, 45 ns each.
class Server : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<Server> socket{"socket"};
  explicit Server(sc_core::sc_module_name name) : sc_module(name) {
    socket.register_nb_transport_fw(this, &Server::forward);
    sc_core::sc_spawn([this] { serve(); }, "serve");
  }

 private:
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time&) {
    payload.acquire();
    queue_.push_back(&payload);
    arrived_.notify();
    phase = tlm::END_REQ;
    return tlm::TLM_UPDATED;
  }
  void serve() {
    for (;;) {
      while (queue_.empty()) sc_core::wait(arrived_);
      sc_core::wait(45, sc_core::SC_NS);
      tlm::tlm_generic_payload& payload = *queue_.front();
      queue_.pop_front();
      payload.set_response_status(tlm::TLM_OK_RESPONSE);
      tlm::tlm_phase phase = tlm::BEGIN_RESP;
      sc_core::sc_time time;
      socket->nb_transport_bw(payload, phase, time);
      payload.release();
    }
  }
  std::deque<tlm::tlm_generic_payload*> queue_;
  sc_core::sc_event arrived_;
};

struct Played {
  unsigned done = 0, finished = 0, failed = 0;
  std::vector<std::uint64_t> replaced;
  PlayerHooks hooks() {
    PlayerHooks all;
    all.done = [this] { ++done; };
    all.finished = [this] { ++finished; };
    all.failed = [this] { ++failed; };
    all.replace = [this](std::uint32_t, std::uint64_t address, const sc_core::sc_time&) {
      replaced.push_back(address);
    };
    return all;
  }
};

std::string text_of(std::exception_ptr error) {
  try {
    if (error) std::rethrow_exception(error);
  } catch (const std::exception& caught) {
    return caught.what();
  }
  return {};
}

}  // namespace

TEST_CASE("a non-blocking player keeps the protocol and its limit, whatever the target's manner",
          "[traffic]") {
  Played played;
  NonBlockingPlayer player("player", 0, 5, sc_core::SC_ZERO_TIME, played.hooks());
  AnyManner target("target");
  player.initiator_socket.bind(target.socket);
  player.set_source(std::make_unique<Words>(5000));
  sc_core::sc_start();
  CHECK(player.end().finished);
  CHECK(player.waiting().empty());
  CHECK(played.done == 5000);
  CHECK(played.finished == 1);
  CHECK(played.failed == 0);
  CHECK(target.wrong == 0);
  CHECK(target.most == 5);
  REQUIRE(target.order.size() == 5000);
  for (std::size_t i = 0; i < target.order.size(); ++i) CHECK(target.order[i] == i / 2 * 4);
}

TEST_CASE("a non-blocking player's writes reach memory", "[traffic]") {
  Played played;
  NonBlockingPlayer player("player", 0, 8, sc_core::SC_ZERO_TIME, played.hooks());
  DramConfig config;
  config.grade = load_grade("ddr4-2400t");
  config.log_commands = true;
  DramController memory("memory", config);
  player.initiator_socket.bind(memory.target_socket);
  player.set_source(std::make_unique<Words>(2000));
  sc_core::sc_start();
  REQUIRE(player.end().finished);
  for (std::uint32_t word = 0; word < 1000; ++word) {
    std::uint32_t value = 0;
    memory.peek(word * 4, reinterpret_cast<std::uint8_t*>(&value), 4);
    CHECK(value == 2 * word + 1);
  }
  require_legal(memory.commands(0), config);
}

TEST_CASE("with one access in flight the player takes think time and latency for each", "[traffic]") {
  NonBlockingPlayer player("player", 0, 1, sc_core::sc_time(7, sc_core::SC_NS), {});
  PlainMemory memory("memory", {});  // 40 ns and one beat of 5 ns, completes early
  player.initiator_socket.bind(memory.target_socket);
  player.set_source(std::make_unique<Words>(10));
  sc_core::sc_start();
  CHECK(player.end().at == sc_core::sc_time(10 * (7 + 45), sc_core::SC_NS));
}

TEST_CASE("with two in flight the player thinks while one is served", "[traffic]") {
  NonBlockingPlayer player("player", 0, 2, sc_core::sc_time(7, sc_core::SC_NS), {});
  Server server("server");
  player.initiator_socket.bind(server.socket);
  player.set_source(std::make_unique<Words>(10));
  sc_core::sc_start();
  CHECK(player.end().at ==
        sc_core::sc_time(7 + 10 * 45, sc_core::SC_NS));  // from 7 on the server is never idle
}

TEST_CASE("a refused access stops a non-blocking player, and is named", "[traffic]") {
  Played played;
  NonBlockingPlayer player("player", 3, 4, sc_core::SC_ZERO_TIME, played.hooks());
  DramConfig config;
  config.grade = load_grade("ddr4-2400t");
  config.log_commands = true;
  DramController memory("memory", config);
  player.initiator_socket.bind(memory.target_socket);
  class Beyond : public AccessSource {
   public:
    bool next(Access& access) override {
      access = Access();
      access.initiator = 3;
      access.size = 4;
      access.address = ++done_ == 3 ? std::uint64_t{1} << 50 : 64 * done_;
      return done_ <= 6;
    }

   private:
    std::uint64_t done_ = 0;
  };
  player.set_source(std::make_unique<Beyond>());
  sc_core::sc_start();
  CHECK(played.failed == 1);
  CHECK(played.finished == 0);
  CHECK_FALSE(player.end().finished);
  CHECK(text_of(player.end().error) ==
        "access 3 of its initiator (initiator 3, read of 4 bytes at 0x4000000000000) was answered with "
        "TLM_ADDRESS_ERROR_RESPONSE");
  require_legal(memory.commands(0), config);
}

TEST_CASE("a player tells which access it still waits for", "[traffic]") {
  struct Silent : sc_core::sc_module {
    tlm_utils::simple_target_socket<Silent> socket{"socket"};
    explicit Silent(sc_core::sc_module_name name) : sc_module(name) {
      socket.register_b_transport(this, &Silent::b_transport);
      socket.register_nb_transport_fw(this, &Silent::forward);
    }
    void b_transport(tlm::tlm_generic_payload&, sc_core::sc_time&) { sc_core::wait(never); }
    tlm::tlm_sync_enum forward(tlm::tlm_generic_payload&, tlm::tlm_phase& phase, sc_core::sc_time&) {
      phase = tlm::END_REQ;
      return tlm::TLM_UPDATED;
    }
    sc_core::sc_event never{"never"};
  };
  Silent first("first"), second("second");
  Player blocking("blocking", 0, sc_core::SC_ZERO_TIME, {});
  NonBlockingPlayer flying("flying", 0, 2, sc_core::SC_ZERO_TIME, {});
  blocking.initiator_socket.bind(first.socket);
  flying.initiator_socket.bind(second.socket);
  blocking.set_source(std::make_unique<Words>(4));
  flying.set_source(std::make_unique<Words>(4));
  sc_core::sc_start();
  CHECK_FALSE(blocking.end().finished);
  CHECK(blocking.waiting() == "initiator 0, write of 4 bytes at 0x0");
  CHECK_FALSE(flying.end().finished);
  CHECK(flying.waiting() == "initiator 0, write of 4 bytes at 0x0\ninitiator 0, read of 4 bytes at 0x0");
}
