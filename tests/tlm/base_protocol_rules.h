// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The rules of the TLM-2.0 base protocol as one hop (one initiator socket bound to one target socket) shows
// them, and which of them were broken there, by whom. Clauses are of IEEE 1666-2011; their numbers are values
// from memory. It shares nothing with the models. Needs no simulation: whoever passes calls on tells it of
// each call and each return, and what the time was.
//
// It watches what one hop can see. Not seen: whether an interconnect keeps the order of overlapping requests
// (15.2.9), or restores an address (14.10 does not ask for it).
#pragma once

#include <array>
#include <cstdint>
#include <memory>
#include <string>
#include <tlm>
#include <vector>

#include "earshot/timing/picoseconds.h"

namespace earshot::test {

enum class Rule : std::uint8_t {
  phase_order,          // a phase that may not come next, or not on this path
  return_status,        // a return value and phase that may not answer this phase
  accepted_unchanged,   // TLM_ACCEPTED, but phase, time or payload was changed
  request_exclusion,    // BEGIN_REQ before the request before it has ended
  response_exclusion,   // BEGIN_RESP before the response before it has ended
  payload_in_use,       // sent again before its transaction has ended
  unknown_payload,      // on the backward path, of no transaction
  nested_paths,         // a call on one path from within a call on the other, if of another hop
  non_blocking_waits,   // time went by in a call that may not wait
  non_blocking_blocks,  // b_transport called from within nb_transport
  attributes,           // of the payload, that nobody but the initiator may set
  write_data,           // of a write, changed
  byte_enables,         // changed
  disabled_bytes,       // of a read, written (a recommendation: "should")
  status_at_request,    // not TLM_INCOMPLETE_RESPONSE
  status_at_response,   // still TLM_INCOMPLETE_RESPONSE
  status_kept,          // changed between the response's begin and its end
  malformed,            // no data, length, streaming width or byte enable length of 0
  no_memory_manager,    // in nb_transport, or nobody holds a reference
  time_decreased,       // an effective time smaller on return than at the call
  time_order,           // a phase of a transaction before its preceding phase
  dmi_region,           // granted without the address asked for, or the access
  dmi_invalidation,     // of a range whose end is before its begin
  debug_count,          // more bytes done than asked for
};
constexpr int rules = 24;
const char* name_of(Rule rule);    // "request-exclusion"
const char* clause_of(Rule rule);  // "15.2.6"

enum class Side : std::uint8_t { initiator, target };

struct BrokenRule {
  Rule rule;
  Side by;
  std::uint64_t address;  // of the payload
  std::string hop;
  std::string text;  // all of it, for people
};

class BaseProtocolRules {
 public:
  using Payload = tlm::tlm_generic_payload;

  struct Instant {
    Picoseconds now = 0;
    Picoseconds delay = 0;    // the annotated time; the rules' "effective time" is the sum
    std::uint64_t delta = 0;  // the kernel's count of delta cycles
  };

  // What was so at a call.
  struct Call {
    Instant at;
    int phase = 0;         // 0: not nb_transport
    bool ignored = false;  // an ignorable phase, or of no transaction: the return is not judged
    std::uint64_t address = 0;
    bool dmi = false;
    tlm::tlm_response_status status = tlm::TLM_INCOMPLETE_RESPONSE;
  };

  // `hop`: a name for messages.
  explicit BaseProtocolRules(std::string hop) : hop_(std::move(hop)) {}
  BaseProtocolRules(const BaseProtocolRules&) = delete;
  BaseProtocolRules& operator=(const BaseProtocolRules&) = delete;

  Call blocking(const Payload& payload, const Instant& at);
  void blocking_returns(const Call& call, const Payload& payload, const Instant& at);
  void abandoned(const Payload& payload);  // the caller's process was killed within the call

  Call forward(const Payload& payload, const tlm::tlm_phase& phase, const Instant& at);
  void forward_returns(const Call& call, const Payload& payload, tlm::tlm_sync_enum status,
                       const tlm::tlm_phase& phase, const Instant& at);
  Call backward(const Payload& payload, const tlm::tlm_phase& phase, const Instant& at);
  void backward_returns(const Call& call, const Payload& payload, tlm::tlm_sync_enum status,
                        const tlm::tlm_phase& phase, const Instant& at);

  // Instead of the return, if the call threw.
  static void forward_thrown() { --forward_depth_; }
  static void backward_thrown() { --backward_depth_; }

  Call direct_memory(const Payload& payload, const Instant& at);
  void direct_memory_returns(const Call& call, const Payload& payload, bool granted, const tlm::tlm_dmi& dmi,
                             const Instant& at);
  void invalidation(std::uint64_t first, std::uint64_t last);
  Call debug(const Payload& payload, const Instant& at);
  void debug_returns(const Call& call, const Payload& payload, unsigned count, const Instant& at);

  const std::vector<BrokenRule>& broken() const { return broken_; }  // the first `kept`
  std::uint64_t count(Rule rule, Side by) const {
    return counts_[static_cast<std::size_t>(by)][static_cast<std::size_t>(rule)];
  }
  std::size_t in_flight() const { return in_flight_.size(); }
  static constexpr std::size_t kept = 100;

 private:
  // What the initiator set, and nobody else may change before the end.
  struct Transaction {
    const Payload* payload = nullptr;
    int phase = 0;           // the last; 0: blocking, debug or DMI
    Picoseconds latest = 0;  // the effective time of that
    tlm::tlm_command command = tlm::TLM_IGNORE_COMMAND;
    const unsigned char* data = nullptr;
    unsigned length = 0, width = 0, enable_length = 0;
    const unsigned char* enable = nullptr;
    tlm::tlm_response_status answer = tlm::TLM_INCOMPLETE_RESPONSE;
    std::uint64_t address = 0;
    bool debugged = false;  // a debugger wrote where this writes: its data may have been brought up to date
    std::vector<std::uint8_t> bytes, enables;
  };

  void breaks(Rule rule, Side by, const Payload& payload, const std::string& what);
  Transaction* find(const Payload& payload);
  Transaction& begin(const Payload& payload, int phase, const Instant& at);
  void end(Transaction& transaction);
  Call call(const Payload& payload, int phase, const Instant& at) const;
  void check_request(const Payload& payload, bool non_blocking);
  void check_unchanged(const Transaction& transaction, const Payload& payload, Side by);
  void check_bytes(const Transaction& transaction, const Payload& payload, Side by);
  void check_response(Transaction& transaction, const Payload& payload);
  void check_accepted(const Call& call, const Payload& payload, const tlm::tlm_phase& phase,
                      const Instant& at, Side by);
  void check_instant(const Call& call, const Payload& payload, const Instant& at, Side by);
  void check_time(const Call& call, const Payload& payload, const Instant& at, Side by);
  void reaches(Transaction& transaction, int phase, const Instant& at, Side by);
  void responds(Transaction& transaction, const Payload& payload, const Instant& at);
  void request_ends(const Payload& payload);

  std::string hop_;
  std::vector<BrokenRule> broken_;
  std::array<std::array<std::uint64_t, rules>, 2> counts_{};
  std::vector<std::unique_ptr<Transaction>> in_flight_, unused_;
  const Payload* requesting_ = nullptr;
  const Payload* responding_ = nullptr;
  // Calls under way, over all hops: none of them may wait, so they nest.
  static int forward_depth_, backward_depth_;
};

}  // namespace earshot::test
