// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "tlm/base_protocol_rules.h"

#include <algorithm>
#include <sstream>

namespace earshot::test {
namespace {

struct Words {
  const char* name;
  const char* clause;
};

// In the order of Rule.
constexpr std::array<Words, rules> words = {{
    {"phase-order", "15.2.4"},        {"return-status", "15.2.4"},
    {"accepted-unchanged", "11.1.2"}, {"request-exclusion", "15.2.6"},
    {"response-exclusion", "15.2.6"}, {"payload-in-use", "14.5"},
    {"unknown-payload", "15.2.4"},    {"nested-paths", "11.1.2"},
    {"non-blocking-waits", "11.1.2"}, {"non-blocking-blocks", "11.1.2"},
    {"attributes", "14.7"},           {"write-data", "14.11"},
    {"byte-enables", "14.13"},        {"disabled-bytes", "14.13"},
    {"status-at-request", "14.17"},   {"status-at-response", "14.17"},
    {"status-kept", "14.17"},         {"malformed", "14.11 to 14.15"},
    {"no-memory-manager", "14.5"},    {"time-decreased", "11.1.3, 15.2.7"},
    {"time-order", "15.2.7"},         {"dmi-region", "11.2"},
    {"dmi-invalidation", "11.2"},     {"debug-count", "11.3"},
}};

bool base_phase(int phase) {
  return phase <= tlm::END_RESP;
}
Picoseconds effective(const BaseProtocolRules::Instant& at) {
  return at.now + at.delay;
}

}  // namespace

const char* name_of(Rule rule) {
  return words[static_cast<std::size_t>(rule)].name;
}
const char* clause_of(Rule rule) {
  return words[static_cast<std::size_t>(rule)].clause;
}

int BaseProtocolRules::forward_depth_ = 0;
int BaseProtocolRules::backward_depth_ = 0;

void BaseProtocolRules::breaks(Rule rule, Side by, const Payload& payload, const std::string& what) {
  ++counts_[static_cast<std::size_t>(by)][static_cast<std::size_t>(rule)];
  if (broken_.size() == kept) return;
  std::ostringstream text;
  text << hop_ << ": the " << (by == Side::initiator ? "initiator" : "target") << " breaks " << name_of(rule)
       << " (IEEE 1666-2011, " << clause_of(rule) << "), "
       << (payload.is_read()    ? "read"
           : payload.is_write() ? "write"
                                : "ignore")
       << " at 0x" << std::hex << payload.get_address() << ": " << what;
  broken_.push_back({rule, by, payload.get_address(), hop_, text.str()});
}

BaseProtocolRules::Transaction* BaseProtocolRules::find(const Payload& payload) {
  for (auto at = in_flight_.rbegin(); at != in_flight_.rend();
       ++at)  // the newest first: a debug access may be within
    if ((*at)->payload == &payload) return at->get();
  return nullptr;
}

BaseProtocolRules::Transaction& BaseProtocolRules::begin(const Payload& payload, int phase,
                                                         const Instant& at) {
  if (unused_.empty()) unused_.push_back(std::make_unique<Transaction>());
  Transaction& transaction = *unused_.back();
  in_flight_.push_back(std::move(unused_.back()));
  unused_.pop_back();
  transaction.payload = &payload;
  transaction.phase = phase;
  transaction.latest = effective(at);
  transaction.command = payload.get_command();
  transaction.data = payload.get_data_ptr();
  transaction.length = payload.get_data_length();
  transaction.width = payload.get_streaming_width();
  transaction.enable = payload.get_byte_enable_ptr();
  transaction.enable_length = payload.get_byte_enable_length();
  transaction.address = payload.get_address();
  transaction.debugged = false;
  transaction.bytes.clear();
  transaction.enables.clear();
  // Of a read, only what byte enables forbid to write is of interest.
  if (transaction.data != nullptr &&
      (payload.is_write() || (payload.is_read() && transaction.enable != nullptr)))
    transaction.bytes.assign(transaction.data, transaction.data + transaction.length);
  if (transaction.enable != nullptr)
    transaction.enables.assign(transaction.enable, transaction.enable + transaction.enable_length);
  return transaction;
}

void BaseProtocolRules::end(Transaction& transaction) {
  if (requesting_ == transaction.payload) requesting_ = nullptr;
  if (responding_ == transaction.payload) responding_ = nullptr;
  const auto at = std::find_if(in_flight_.begin(), in_flight_.end(),
                               [&](const auto& other) { return other.get() == &transaction; });
  unused_.push_back(std::move(*at));
  in_flight_.erase(at);
}

void BaseProtocolRules::abandoned(const Payload& payload) {
  if (Transaction* const transaction = find(payload)) end(*transaction);
}

BaseProtocolRules::Call BaseProtocolRules::call(const Payload& payload, int phase, const Instant& at) const {
  return {at, phase, false, payload.get_address(), payload.is_dmi_allowed(), payload.get_response_status()};
}

void BaseProtocolRules::check_request(const Payload& payload, bool non_blocking) {
  if (payload.get_response_status() != tlm::TLM_INCOMPLETE_RESPONSE)
    breaks(Rule::status_at_request, Side::initiator, payload,
           "the response status is " + payload.get_response_string());
  if (payload.get_command() != tlm::TLM_IGNORE_COMMAND) {
    if (payload.get_data_ptr() == nullptr)
      breaks(Rule::malformed, Side::initiator, payload, "no data pointer");
    if (payload.get_data_length() == 0)
      breaks(Rule::malformed, Side::initiator, payload, "a data length of 0");
    if (payload.get_streaming_width() == 0)
      breaks(Rule::malformed, Side::initiator, payload, "a streaming width of 0");
  }
  if (payload.get_byte_enable_ptr() != nullptr && payload.get_byte_enable_length() == 0)
    breaks(Rule::malformed, Side::initiator, payload, "a byte enable length of 0");
  if (!non_blocking) return;
  if (!payload.has_mm())
    breaks(Rule::no_memory_manager, Side::initiator, payload, "no memory manager");
  else if (payload.get_ref_count() < 1)
    breaks(Rule::no_memory_manager, Side::initiator, payload, "no reference held");
}

void BaseProtocolRules::check_unchanged(const Transaction& transaction, const Payload& payload, Side by) {
  const auto check = [&](bool same, const char* what) {
    if (!same) breaks(Rule::attributes, by, payload, std::string("the ") + what + " was changed");
  };
  check(payload.get_command() == transaction.command, "command");
  check(payload.get_data_ptr() == transaction.data, "data pointer");
  check(payload.get_data_length() == transaction.length, "data length");
  check(payload.get_byte_enable_ptr() == transaction.enable, "byte enable pointer");
  check(payload.get_byte_enable_length() == transaction.enable_length, "byte enable length");
  check(payload.get_streaming_width() == transaction.width, "streaming width");
  check_bytes(transaction, payload, by);
}

void BaseProtocolRules::check_bytes(const Transaction& transaction, const Payload& payload, Side by) {
  if (!std::equal(transaction.enables.begin(), transaction.enables.end(), transaction.enable)) {
    breaks(Rule::byte_enables, by, payload, "a byte enable was changed");
    return;
  }
  if (transaction.command == tlm::TLM_WRITE_COMMAND) {
    if (!transaction.debugged &&
        !std::equal(transaction.bytes.begin(), transaction.bytes.end(), transaction.data))
      breaks(Rule::write_data, by, payload, "the data to write was changed");
    return;
  }
  if (transaction.enables.empty()) return;
  for (std::size_t i = 0; i < transaction.bytes.size(); ++i) {
    if (transaction.enables[i % transaction.enables.size()] == TLM_BYTE_ENABLED) continue;
    if (transaction.bytes[i] == transaction.data[i]) continue;
    breaks(Rule::disabled_bytes, by, payload, "byte " + std::to_string(i) + " is disabled and was written");
    return;
  }
}

// The target has answered.
void BaseProtocolRules::check_response(Transaction& transaction, const Payload& payload) {
  check_unchanged(transaction, payload, Side::target);
  if (payload.get_response_status() == tlm::TLM_INCOMPLETE_RESPONSE &&
      transaction.command != tlm::TLM_IGNORE_COMMAND)
    breaks(Rule::status_at_response, Side::target, payload, "the response status was never set");
  transaction.answer = payload.get_response_status();
}

void BaseProtocolRules::check_accepted(const Call& call, const Payload& payload, const tlm::tlm_phase& phase,
                                       const Instant& at, Side by) {
  if (static_cast<int>(phase) != call.phase)
    breaks(Rule::accepted_unchanged, by, payload, "the phase was changed");
  if (at.delay != call.at.delay) breaks(Rule::accepted_unchanged, by, payload, "the time was changed");
  if (payload.get_address() != call.address || payload.is_dmi_allowed() != call.dmi ||
      payload.get_response_status() != call.status)
    breaks(Rule::accepted_unchanged, by, payload, "the payload was changed");
}

// Nothing may have happened in between.
void BaseProtocolRules::check_instant(const Call& call, const Payload& payload, const Instant& at, Side by) {
  if (at.now != call.at.now || at.delta != call.at.delta)
    breaks(Rule::non_blocking_waits, by, payload,
           "it waited " + std::to_string(at.now - call.at.now) + " ps");
}

void BaseProtocolRules::check_time(const Call& call, const Payload& payload, const Instant& at, Side by) {
  if (effective(at) < effective(call.at))
    breaks(Rule::time_decreased, by, payload,
           "from " + std::to_string(effective(call.at)) + " to " + std::to_string(effective(at)) + " ps");
}

void BaseProtocolRules::reaches(Transaction& transaction, int phase, const Instant& at, Side by) {
  if (effective(at) < transaction.latest)
    breaks(Rule::time_order, by, *transaction.payload,
           tlm::tlm_phase(static_cast<tlm::tlm_phase_enum>(phase)).get_name() + std::string(" at ") +
               std::to_string(effective(at)) + ", the phase before it at " +
               std::to_string(transaction.latest) + " ps");
  transaction.phase = phase;
  transaction.latest = std::max(transaction.latest, effective(at));
}

void BaseProtocolRules::request_ends(const Payload& payload) {
  if (requesting_ == &payload) requesting_ = nullptr;
}

void BaseProtocolRules::responds(Transaction& transaction, const Payload& payload, const Instant& at) {
  request_ends(payload);
  if (responding_ != nullptr && responding_ != &payload)
    breaks(Rule::response_exclusion, Side::target, payload, "another response has not ended");
  responding_ = &payload;
  check_response(transaction, payload);
  reaches(transaction, tlm::BEGIN_RESP, at, Side::target);
}

BaseProtocolRules::Call BaseProtocolRules::blocking(const Payload& payload, const Instant& at) {
  check_request(payload, false);
  if (forward_depth_ + backward_depth_ > 0)
    breaks(Rule::non_blocking_blocks, Side::initiator, payload, "called from within nb_transport");
  Call made = call(payload, 0, at);
  if (find(payload) != nullptr) {
    breaks(Rule::payload_in_use, Side::initiator, payload, "its transaction has not ended");
    made.ignored = true;
    return made;
  }
  begin(payload, 0, at);
  return made;
}

void BaseProtocolRules::blocking_returns(const Call& call, const Payload& payload, const Instant& at) {
  if (call.ignored) return;
  Transaction& transaction = *find(payload);
  check_response(transaction, payload);
  check_time(call, payload, at, Side::target);
  end(transaction);
}

BaseProtocolRules::Call BaseProtocolRules::forward(const Payload& payload, const tlm::tlm_phase& phase,
                                                   const Instant& at) {
  if (backward_depth_ > 0)
    breaks(Rule::nested_paths, Side::initiator, payload, "nb_transport_fw within nb_transport_bw");
  ++forward_depth_;
  const int value = static_cast<int>(static_cast<unsigned>(phase));
  Call made = call(payload, value, at);
  Transaction* const transaction = find(payload);
  if (phase == tlm::BEGIN_REQ) {
    check_request(payload, true);
    if (transaction != nullptr) {
      breaks(Rule::payload_in_use, Side::initiator, payload, "its transaction has not ended");
      made.ignored = true;
      return made;
    }
    if (requesting_ != nullptr)
      breaks(Rule::request_exclusion, Side::initiator, payload, "another request has not ended");
    requesting_ = &payload;
    begin(payload, value, at);
  } else if (phase == tlm::END_RESP && transaction != nullptr && transaction->phase == tlm::BEGIN_RESP) {
    if (payload.get_response_status() != transaction->answer)
      breaks(Rule::status_kept, Side::initiator, payload, "the response status was changed before END_RESP");
    reaches(*transaction, value, at, Side::initiator);
    responding_ = nullptr;
  } else {
    if (base_phase(value))
      breaks(Rule::phase_order, Side::initiator, payload,
             std::string(phase.get_name()) +
                 (transaction == nullptr ? " of no transaction" : " now, on the forward path"));
    made.ignored = true;
  }
  return made;
}

void BaseProtocolRules::forward_returns(const Call& call, const Payload& payload, tlm::tlm_sync_enum status,
                                        const tlm::tlm_phase& phase, const Instant& at) {
  --forward_depth_;
  check_instant(call, payload, at, Side::target);
  if (call.ignored) return;
  if (status == tlm::TLM_ACCEPTED)
    check_accepted(call, payload, phase, at, Side::target);
  else
    check_time(call, payload, at, Side::target);
  Transaction* const transaction = find(payload);
  if (transaction == nullptr) return;  // ended by a nested call
  if (call.phase == tlm::END_RESP) {
    if (status == tlm::TLM_UPDATED)
      breaks(Rule::return_status, Side::target, payload, "TLM_UPDATED to END_RESP");
    end(*transaction);
  } else if (status == tlm::TLM_COMPLETED) {
    check_response(*transaction, payload);
    end(*transaction);
  } else if (status == tlm::TLM_UPDATED && phase == tlm::BEGIN_RESP) {
    responds(*transaction, payload, at);
  } else if (status == tlm::TLM_UPDATED && phase == tlm::END_REQ) {
    check_unchanged(*transaction, payload, Side::target);
    request_ends(payload);
    reaches(*transaction, tlm::END_REQ, at, Side::target);
  } else {
    check_unchanged(*transaction, payload, Side::target);
    if (status == tlm::TLM_UPDATED)
      breaks(Rule::return_status, Side::target, payload,
             std::string("TLM_UPDATED to BEGIN_REQ with ") + phase.get_name());
  }
}

BaseProtocolRules::Call BaseProtocolRules::backward(const Payload& payload, const tlm::tlm_phase& phase,
                                                    const Instant& at) {
  if (forward_depth_ > 0)
    breaks(Rule::nested_paths, Side::target, payload, "nb_transport_bw within nb_transport_fw");
  ++backward_depth_;
  const int value = static_cast<int>(static_cast<unsigned>(phase));
  Call made = call(payload, value, at);
  Transaction* const transaction = find(payload);
  if (transaction == nullptr) {
    breaks(Rule::unknown_payload, Side::target, payload,
           std::string(phase.get_name()) + " of no transaction");
    made.ignored = true;
  } else if (phase == tlm::END_REQ && transaction->phase == tlm::BEGIN_REQ) {
    check_unchanged(*transaction, payload, Side::target);
    request_ends(payload);
    reaches(*transaction, value, at, Side::target);
  } else if (phase == tlm::BEGIN_RESP &&
             (transaction->phase == tlm::BEGIN_REQ || transaction->phase == tlm::END_REQ)) {
    responds(*transaction, payload, at);
  } else {
    if (base_phase(value))
      breaks(Rule::phase_order, Side::target, payload,
             std::string(phase.get_name()) + " now, on the backward path");
    made.ignored = true;
  }
  return made;
}

// The initiator may have reused the payload's data by now, if it has ended the response.
void BaseProtocolRules::backward_returns(const Call& call, const Payload& payload, tlm::tlm_sync_enum status,
                                         const tlm::tlm_phase& phase, const Instant& at) {
  --backward_depth_;
  check_instant(call, payload, at, Side::initiator);
  if (call.ignored) return;
  if (status == tlm::TLM_ACCEPTED)
    check_accepted(call, payload, phase, at, Side::initiator);
  else
    check_time(call, payload, at, Side::initiator);
  Transaction* const transaction = find(payload);
  if (transaction == nullptr || status == tlm::TLM_ACCEPTED) return;
  if (call.phase == tlm::END_REQ) {
    breaks(Rule::return_status, Side::initiator, payload, "END_REQ is answered by TLM_ACCEPTED only");
  } else if (status == tlm::TLM_UPDATED && phase != tlm::END_RESP) {
    breaks(Rule::return_status, Side::initiator, payload,
           std::string("TLM_UPDATED to BEGIN_RESP with ") + phase.get_name());
  } else {
    end(*transaction);
  }
}

BaseProtocolRules::Call BaseProtocolRules::direct_memory(const Payload& payload, const Instant& at) {
  begin(payload, 0, at);
  return call(payload, 0, at);
}

void BaseProtocolRules::direct_memory_returns(const Call& call, const Payload& payload, bool granted,
                                              const tlm::tlm_dmi& dmi, const Instant& at) {
  check_instant(call, payload, at, Side::target);
  Transaction& transaction = *find(payload);
  check_unchanged(transaction, payload, Side::target);
  end(transaction);
  if (!granted) return;
  if (dmi.get_start_address() > call.address || dmi.get_end_address() < call.address)
    breaks(Rule::dmi_region, Side::target, payload, "the region granted does not hold the address");
  if ((payload.is_read() && !dmi.is_read_allowed()) || (payload.is_write() && !dmi.is_write_allowed()))
    breaks(Rule::dmi_region, Side::target, payload, "granted, but not for this command");
}

void BaseProtocolRules::invalidation(std::uint64_t first, std::uint64_t last) {
  if (first <= last) return;
  Payload none;
  none.set_address(first);
  breaks(Rule::dmi_invalidation, Side::target, none, "the range's end is before its begin");
}

BaseProtocolRules::Call BaseProtocolRules::debug(const Payload& payload, const Instant& at) {
  for (const auto& other : in_flight_)
    if (payload.is_write() && payload.get_address() < other->address + other->length &&
        other->address < payload.get_address() + payload.get_data_length())
      other->debugged = true;
  begin(payload, 0, at);
  return call(payload, 0, at);
}

void BaseProtocolRules::debug_returns(const Call& call, const Payload& payload, unsigned count,
                                      const Instant& at) {
  check_instant(call, payload, at, Side::target);
  Transaction& transaction = *find(payload);
  check_unchanged(transaction, payload, Side::target);
  end(transaction);
  if (count > payload.get_data_length())
    breaks(Rule::debug_count, Side::target, payload,
           std::to_string(count) + " of " + std::to_string(payload.get_data_length()) + " bytes");
}

}  // namespace earshot::test
