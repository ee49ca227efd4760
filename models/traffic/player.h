// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Players turn a stream of accesses into TLM-2.0 transactions. A Player is one initiator; it drives anything
// that a TLM-2.0 processor model could drive. In concurrent order each Player replays a stream of its own, as
// fast as the platform lets it; in recorded order a RecordedOrder plays one stream through several Players, one
// access at a time.
//
// Both use b_transport with temporal decoupling: they run ahead of simulation time by up to the global quantum
// (tlm_utils::tlm_quantumkeeper). With a quantum of 0 they synchronise after every access. In arbitrated timing every
// access blocks until it is done; see NonBlockingPlayer for several in flight.
#pragma once

#include <array>
#include <cstdint>
#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_initiator_socket.h>
#include <tlm_utils/tlm_quantumkeeper.h>
#include <unordered_map>
#include <vector>

#include "earshot/traffic/playing.h"
#include "earshot/traffic/think_time.h"
#include "earshot/version.h"

namespace earshot {

class Player : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<Player> initiator_socket{"initiator_socket"};

  // Plays nothing of its own until given a source before simulation starts. `think` passes before every access.
  Player(sc_core::sc_module_name name, std::uint32_t initiator, ThinkTime think, PlayerHooks hooks,
         HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  const char* kind() const override { return "earshot::Player"; }

  void set_source(std::unique_ptr<AccessSource> source) { source_ = std::move(source); }

  // Performs one access at `delay` from now and adds what it takes. The bytes read are in bytes() afterwards.
  // From a simulation process. Throws PlayError if the platform answers with an error.
  void perform(const Access& access, sc_core::sc_time& delay);
  const std::uint8_t* bytes() const { return bytes_.data(); }
  // Writes bytes by debug access: what memory held before the recording began.
  void preset(std::uint64_t address, const std::uint8_t* bytes, unsigned length);

  const PlayerEnd& end() const { return end_; }  // of what it plays of its own
  std::string waiting() const { return under_way_ == nullptr ? "" : text_of(*under_way_); }  // the access under way

 private:
  void play();

  std::uint32_t initiator_;
  ThinkTime think_;
  PlayerHooks hooks_;
  std::unique_ptr<AccessSource> source_;
  tlm::tlm_generic_payload payload_;
  std::vector<std::uint8_t> bytes_;
  std::uint64_t performed_ = 0;
  const Access* under_way_ = nullptr;
  PlayerEnd end_;
};

// Plays one stream through several players, one access at a time, in the stream's order.
class RecordedOrder : public sc_core::sc_module {
 public:
  // `players` are indexed by initiator and must outlive this. With `check_values`, a read's recorded value is
  // compared with what the platform returned; bytes no access has touched before take their recorded value.
  RecordedOrder(sc_core::sc_module_name name, std::vector<Player*> players, std::unique_ptr<AccessSource> source,
                bool check_values, PlayerHooks hooks, HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  const char* kind() const override { return "earshot::RecordedOrder"; }

  const PlayerEnd& end() const { return end_; }
  std::uint64_t reads_compared() const { return compared_; }
  std::uint64_t reads_that_differ() const { return different_; }
  const std::string& first_difference() const { return first_difference_; }

 private:
  void play();
  void step(const Access& access, sc_core::sc_time& delay);
  void learn(const Access& access);
  void compare(const Access& access, const Player& player);

  std::vector<Player*> players_;
  std::unique_ptr<AccessSource> source_;
  bool check_values_;
  PlayerHooks hooks_;
  // One bit for each byte accessed so far, 64 bytes a word, 64 words a page.
  using Touched = std::array<std::uint64_t, 64>;
  std::unordered_map<std::uint64_t, Touched> touched_;
  struct Recent {
    std::uint64_t page = ~std::uint64_t{0};
    Touched* touched = nullptr;
  };
  std::array<Recent, 64> recent_;  // pages looked up lately, one for each value of the number's low bits
  std::uint64_t played_ = 0;
  std::uint64_t compared_ = 0;
  std::uint64_t different_ = 0;
  std::string first_difference_;
  PlayerEnd end_;
};

}  // namespace earshot
