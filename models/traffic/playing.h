// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What all players have in common: the hooks by which they reach the world around them, how they end, and how an
// access becomes a generic payload.
#pragma once

#include <cstdint>
#include <exception>
#include <functional>
#include <stdexcept>
#include <string>
#include <systemc>
#include <tlm>

#include "earshot/traffic/recording.h"

namespace earshot {

// What a player asks of the world around it that TLM-2.0 has no word for.
struct PlayerHooks {
  // Carries out AccessOp::replace for an initiator at the local time `delay` from now. Unset: a replace is skipped.
  std::function<void(std::uint32_t initiator, std::uint64_t address, const sc_core::sc_time& delay)> replace;
  // Called after every access, for progress. May be unset.
  std::function<void()> done;
  // Called when a player stops early because of an error. May be unset; the runner's place to end the simulation.
  std::function<void()> failed;
  // Called when a player has played all, at the simulation time at which it has. May be unset.
  std::function<void()> finished;
};

// How a player's part ended.
struct PlayerEnd {
  bool finished = false;
  sc_core::sc_time at;       // if finished
  std::exception_ptr error;  // why it stopped early; null if it did not
};

// An access that the platform answered with an error or has no cache for: what() names the access.
class PlayError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// "initiator 2, read of 4 bytes at 0x40"
std::string text_of(const Access& access);

// Makes `payload` the read or write that `access` is, the initiator's `number`-th, with its data in `bytes`. A write
// without a recorded value writes bytes that are different for every write and the same in every run.
// REQUIRES: access.op is no replace; `bytes` has room for access.size, and for 8.
void make_payload(const Access& access, std::uint64_t number, std::uint8_t* bytes, tlm::tlm_generic_payload& payload);

// Says that `payload`, the initiator's `number`-th access, was answered with an error.
PlayError refusal(const Access& access, std::uint64_t number, const tlm::tlm_generic_payload& payload);

}  // namespace earshot
