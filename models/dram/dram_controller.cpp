// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The way of requests through the controller. The socket's side is in dram_controller_socket.cpp.
#include "earshot/dram/dram_controller.h"

#include <algorithm>

#include "earshot/dram/payload_bytes.h"

namespace earshot {

DramController::DramController(sc_core::sc_module_name name, const DramConfig& config)
    : sc_module(name), config_(config), burst_bytes_(config.burst_bytes()), wake_("wake") {
  target_socket.bind(static_cast<tlm::tlm_fw_transport_if<>&>(*this));
  const std::vector<std::string> problems = config.problems();
  if (!problems.empty()) {
    std::string text = this->name();
    for (const std::string& problem : problems) text += "\n  " + problem;
    SC_REPORT_ERROR("/earshot/dram/config", text.c_str());
    return;
  }
  last_byte_ = config.bytes() - 1;
  map_ = std::make_unique<DramAddressMap>(config);
  if (config.pace == DramPace::annotated) {
    estimate_ = std::make_unique<DramEstimate>(config);
    return;
  }
  for (unsigned c = 0; c < config.channels; ++c)
    channels_.push_back(std::make_unique<DramChannel>(config, c));
  event_memos_.resize(config.channels);
  SC_HAS_PROCESS(DramController);
  SC_METHOD(work);
  sensitive << wake_;
  dont_initialize();
}

// The only process. Whatever is due now, in the order of cause and effect.
void DramController::work() {
  const Picoseconds now = now_ps();
  for (unsigned c = 0; c < channels_.size(); ++c)
    if (event_time(c) <= now) channels_[c]->advance(clock_now(), completions_);
  note_completions();
  while (!coming_.empty() && coming_.top().time <= now) {
    const unsigned id = coming_.top().id;
    coming_.pop();
    arrive(id);
  }
  enter();
  while (!completing_.empty() && completing_.top().time <= now) {
    const unsigned id = completing_.top().id;
    completing_.pop();
    complete(id);
  }
  send_responses();
  schedule();
}

unsigned DramController::take(tlm::tlm_generic_payload& payload, bool blocking) {
  if (free_ids_.empty()) {
    free_ids_.push_back(static_cast<unsigned>(requests_.size()));
    requests_.push_back(std::make_unique<Request>());
  }
  const unsigned id = free_ids_.back();
  free_ids_.pop_back();
  Request& request = *requests_[id];
  request.payload = &payload;
  request.blocking = blocking;
  request.complete = request.followed = false;
  request.entered = request.finished = request.waits_for = 0;
  request.done = 0;
  request.started = DramChannel::never;
  request.first_burst = payload.get_address() / burst_bytes_;
  const std::uint64_t reach = payload.get_address() % burst_bytes_ + (payload_extent(payload) - 1);
  request.last_burst = request.first_burst + (reach < burst_bytes_ ? 0 : reach / burst_bytes_);
  request.bursts = static_cast<unsigned>(request.last_burst - request.first_burst + 1);
  return id;
}

void DramController::arrive(unsigned id) {
  Request& request = *requests_[id];
  request.arrived = now_ps();
  bool shared = false;
  for (std::uint64_t burst = request.first_burst; burst <= request.last_burst; ++burst)
    shared |= touched(burst)++ != 0;
  for (unsigned i = shared ? oldest_ : nobody; i != nobody; i = requests_[i]->younger) {
    Request& older = *requests_[i];
    if (!overlap(older, request)) continue;
    older.followed = true;
    ++request.waits_for;
  }
  request.older = youngest_;
  request.younger = nobody;
  (youngest_ == nobody ? oldest_ : requests_[youngest_]->younger) = id;
  youngest_ = id;
  entry_.push_back(id);
  entry_meter_.enter(request.arrived);
}

void DramController::enter() {
  if (entering_) return;  // END_REQ makes an initiator send its next request: the loop below will see it
  entering_ = true;
  while (!entry_.empty() && enter_bursts(entry_.front())) {
    const unsigned id = entry_.front();
    entry_.pop_front();
    entry_meter_.leave(now_ps(), requests_[id]->arrived);
    move_payload_bytes(*requests_[id]->payload, bytes_);
    if (!requests_[id]->blocking) end_request(id);
  }
  entering_ = false;
}

bool DramController::enter_bursts(unsigned id) {
  Request& request = *requests_[id];
  const Clocks now = clock_now();
  while (request.entered < request.bursts) {
    const DramBurst burst = burst_of(request, id, request.entered);
    DramChannel& channel = *channels_[burst.place.channel];
    if (!channel.accepts(burst.write)) break;
    channel.enqueue(burst, now, completions_);
    ++request.entered;
  }
  note_completions();
  return request.entered == request.bursts;
}

DramBurst DramController::burst_of(const Request& request, unsigned id, unsigned index) const {
  const tlm::tlm_generic_payload& payload = *request.payload;
  const std::uint64_t number = request.first_burst + index;
  DramBurst burst{id, payload.is_write(), number, map_->place(number)};
  if (burst.write && payload.get_byte_enable_ptr() != nullptr) return burst;  // which bytes is not known here
  const std::uint64_t begin = burst.number * burst_bytes_;
  const std::uint64_t address = payload.get_address();
  const std::uint64_t from = std::max(address, begin);
  const std::uint64_t until = std::min(address + payload_extent(payload), begin + burst_bytes_);
  burst.first = static_cast<unsigned>(from - begin);
  burst.last = static_cast<unsigned>(until - begin);
  return burst;
}

void DramController::note_completions() {
  for (const DramCompletion& completion : completions_) {
    Request& request = *requests_[completion.id];
    request.started = std::min(request.started, completion.started);
    request.done = std::max(request.done, completion.done);
    if (++request.finished == request.bursts)
      completing_.push({config_.grade.clock.edge(request.done + latency()), order_++, completion.id});
  }
  completions_.clear();
}

void DramController::complete(unsigned id) {
  Request& request = *requests_[id];
  request.complete = true;
  request.completed = now_ps();
  if (request.waits_for == 0) respond(id);
}

// Lets younger requests of the same bursts follow.
void DramController::respond(unsigned id) {
  Request& request = *requests_[id];
  for (std::uint64_t burst = request.first_burst; burst <= request.last_burst; ++burst) --touched(burst);
  (request.older == nobody ? oldest_ : requests_[request.older]->younger) = request.younger;
  (request.younger == nobody ? youngest_ : requests_[request.younger]->older) = request.older;
  if (request.blocking)
    request.responded.notify();
  else
    responses_.push_back(id);
  if (!request.followed) return;
  std::vector<unsigned> released;
  for (unsigned next = request.younger; next != nobody; next = requests_[next]->younger) {
    Request& younger = *requests_[next];
    if (overlap(younger, request) && --younger.waits_for == 0 && younger.complete) released.push_back(next);
  }
  for (const unsigned follower : released) respond(follower);
}

void DramController::tell_waiting(Request& request) const {
  if (auto* times = request.payload->get_extension<MemoryTimes>(); times != nullptr)
    times->queue +=
        config_.grade.clock.edge(request.started) - request.arrived + (now_ps() - request.completed);
}

void DramController::forget(unsigned id) {
  requests_[id]->payload = nullptr;
  free_ids_.push_back(id);
}

Picoseconds DramController::event_time(unsigned channel) const {
  const Clocks next = channels_[channel]->next_event();
  if (next == DramChannel::never) return ~Picoseconds{0};
  Moment& memo = event_memos_[channel];
  if (next != memo.clock) memo = {next, config_.grade.clock.edge(next)};
  return memo.time;
}

// An sc_event keeps the earliest of the times it is told.
void DramController::schedule() {
  Picoseconds next = ~Picoseconds{0};
  for (unsigned c = 0; c < channels_.size(); ++c) next = std::min(next, event_time(c));
  if (!completing_.empty()) next = std::min(next, completing_.top().time);
  if (!coming_.empty()) next = std::min(next, coming_.top().time);
  if (!responses_.empty() && response_open_ == nobody) next = std::min(next, response_from_);
  if (next == ~Picoseconds{0}) return;
  const Picoseconds now = now_ps();
  wake_.notify(next > now ? from_ps(next - now) : sc_core::SC_ZERO_TIME);
}

Picoseconds DramController::busy_time() const {
  Clocks busy = 0;
  for (unsigned c = 0; c < config_.channels; ++c)
    busy = std::max(busy, estimate_ ? estimate_->data_bus_busy(c) : channels_[c]->data_bus_busy());
  return config_.grade.clock.edge(busy);
}

Picoseconds DramController::busy_until() const {
  Clocks end = estimate_ ? estimate_->last_data_end() : 0;
  for (const auto& channel : channels_) end = std::max(end, channel->data_end());
  return config_.grade.clock.edge(end);
}

DramCounts DramController::counts() {
  if (estimate_) return estimate_->counts(clock_now());
  DramCounts sum;
  for (const auto& channel : channels_) sum.add(channel->counts(clock_now()));
  return sum;
}

const std::vector<CommandRecord>& DramController::commands(unsigned channel) {
  static const std::vector<CommandRecord> none;
  return estimate_ ? none : channels_[channel]->commands(clock_now());
}

std::vector<std::string> DramController::broken_laws() const {
  std::vector<std::string> broken;
  const auto add = [&](const std::string& law) { broken.push_back(std::string(name()) + ": " + law); };
  if (!entry_meter_.littles_law_holds(now_ps()))
    add("Little's law does not hold for the requests without a place");
  for (const auto& channel : channels_)
    for (const std::string& law : channel->broken_laws(clock_now())) add(law);
  return broken;
}

std::vector<std::string> DramController::pending() {
  std::vector<std::string> lines;
  const auto add = [&](const std::string& line) { lines.push_back(std::string(name()) + ": " + line); };
  const auto describe = [&](unsigned id) {
    const Request& request = *requests_[id];
    std::string text = request.payload->is_write() ? "a write" : "a read";
    return text + " of " + std::to_string(payload_extent(*request.payload)) + " bytes at " +
           std::to_string(request.payload->get_address()) + ", arrived at " +
           std::to_string(request.arrived) + " ps";
  };
  if (!entry_.empty())
    add(std::to_string(entry_.size()) + " requests without a place; the first, " + describe(entry_.front()) +
        ", waits for room in a queue");
  for (const auto& channel : channels_)
    for (const std::string& line : channel->pending()) add(line);
  if (response_open_ != nobody)
    add(std::to_string(responses_.size() + 1) + " responses; the first, to " + describe(response_open_) +
        ", waits for END_RESP from " + initiator_name());
  return lines;
}

}  // namespace earshot
