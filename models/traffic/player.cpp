// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#define SC_INCLUDE_DYNAMIC_PROCESSES
#include "earshot/traffic/player.h"

#include <algorithm>
#include <cstring>
#include <sstream>

#include "earshot/version_check.h"

namespace earshot {
namespace {

constexpr std::uint64_t page_bytes = 4096;

// Calls `step(delay)` with the local time until it returns false, synchronising when the quantum is used up and at
// the end. Stores what stopped it early in `end` before it says so: hooks.failed() may end the simulation, and then
// this process never goes on. Kernel reports are not for us and pass through.
template <typename Step>
void run_decoupled(const PlayerHooks& hooks, PlayerEnd& end, Step step) {
  tlm_utils::tlm_quantumkeeper keeper;
  keeper.reset();
  try {
    for (sc_core::sc_time delay; step(delay); delay = keeper.get_local_time()) {
      keeper.set(delay);
      if (keeper.need_sync()) keeper.sync();
    }
  } catch (const sc_core::sc_report&) {
    throw;
  } catch (const std::exception&) {
    end.error = std::current_exception();
    if (hooks.failed) hooks.failed();
  }
  keeper.sync();
  if (end.error != nullptr) return;
  end.at = sc_core::sc_time_stamp();
  end.finished = true;
  if (hooks.finished) hooks.finished();
}

}  // namespace

Player::Player(sc_core::sc_module_name name, std::uint32_t initiator, ThinkTime think, PlayerHooks hooks,
               HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)),
      initiator_(initiator),
      think_(think),
      hooks_(std::move(hooks)),
      bytes_(largest_access) {
  sc_core::sc_spawn([this] { play(); }, "play");
}

void Player::play() {
  if (source_ == nullptr) return;
  Access access;
  run_decoupled(hooks_, end_, [&](sc_core::sc_time& delay) {
    if (!source_->next(access)) return false;
    perform(access, delay);
    return true;
  });
}

void Player::perform(const Access& access, sc_core::sc_time& delay) {
  ++performed_;
  if (access.op == AccessOp::replace) {
    if (hooks_.replace) hooks_.replace(initiator_, access.address, delay);
    if (hooks_.done) hooks_.done();
    return;
  }
  delay += think_.next();
  make_payload(access, performed_, bytes_.data(), payload_);
  under_way_ = &access;
  initiator_socket->b_transport(payload_, delay);
  under_way_ = nullptr;
  if (payload_.is_response_error()) throw refusal(access, performed_, payload_);
  if (hooks_.done) hooks_.done();
}

void Player::preset(std::uint64_t address, const std::uint8_t* bytes, unsigned length) {
  std::vector<std::uint8_t> copy(bytes, bytes + length);
  tlm::tlm_generic_payload debug;
  debug.set_command(tlm::TLM_WRITE_COMMAND);
  debug.set_address(address);
  debug.set_data_ptr(copy.data());
  debug.set_data_length(length);
  debug.set_streaming_width(length);
  initiator_socket->transport_dbg(debug);
}

RecordedOrder::RecordedOrder(sc_core::sc_module_name name, std::vector<Player*> players,
                             std::unique_ptr<AccessSource> source, bool check_values, PlayerHooks hooks,
                             HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)),
      players_(std::move(players)),
      source_(std::move(source)),
      check_values_(check_values),
      hooks_(std::move(hooks)) {
  sc_core::sc_spawn([this] { play(); }, "play");
}

void RecordedOrder::play() {
  Access access;
  run_decoupled(hooks_, end_, [&](sc_core::sc_time& delay) {
    if (!source_->next(access)) return false;
    step(access, delay);
    return true;
  });
}

void RecordedOrder::step(const Access& access, sc_core::sc_time& delay) {
  ++played_;
  if (access.initiator >= players_.size())
    throw PlayError("access " + std::to_string(played_) + " (" + text_of(access) + ") is for initiator " +
                    std::to_string(access.initiator) + ", but there are only " + std::to_string(players_.size()) +
                    " caches: set caches.count to " + std::to_string(access.initiator + 1) + " or more");
  Player& player = *players_[access.initiator];
  if (check_values_) learn(access);
  player.perform(access, delay);
  if (check_values_) compare(access, player);
}

// Marks the access's bytes as touched. The bytes of a read that nobody touched before held their recorded value
// all along: memory is given it.
void RecordedOrder::learn(const Access& access) {
  if (access.op == AccessOp::replace) return;
  const bool teaches = access.op == AccessOp::read && access.has_value;
  for (std::uint32_t at = 0; at < access.size;) {
    const std::uint64_t address = access.address + at;
    const std::uint64_t page = address / page_bytes;
    Recent& recent = recent_[page % recent_.size()];
    if (recent.page != page) recent = {page, &touched_[page]};
    const unsigned first = address % 64;
    const unsigned count = std::min(64 - first, access.size - at);
    const std::uint64_t bits = (~std::uint64_t{0} >> (64 - count)) << first;
    std::uint64_t& word = (*recent.touched)[address % page_bytes / 64];
    for (std::uint64_t fresh = teaches ? bits & ~word : 0; fresh != 0; fresh &= fresh - 1) {
      const auto offset = at + static_cast<unsigned>(__builtin_ctzll(fresh)) - first;
      const auto byte = static_cast<std::uint8_t>(access.value >> (8 * offset));
      players_[access.initiator]->preset(access.address + offset, &byte, 1);
    }
    word |= bits;
    at += count;
  }
}

void RecordedOrder::compare(const Access& access, const Player& player) {
  if (access.op != AccessOp::read || !access.has_value) return;
  ++compared_;
  std::uint64_t got = 0;
  std::memcpy(&got, player.bytes(), sizeof got);
  got &= ~std::uint64_t{0} >> (64 - 8 * access.size);
  if (got == access.value || different_++ > 0) return;
  std::ostringstream out;
  out << "access " << played_ << " (" << text_of(access) << "): the recording has value 0x" << std::hex << access.value
      << ", the platform returned 0x" << got;
  first_difference_ = out.str();
}

}  // namespace earshot
