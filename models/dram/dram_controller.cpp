// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The way of requests through the controller. The socket's side is in dram_controller_socket.cpp.
#include "earshot/dram/dram_controller.h"

#include <algorithm>

#include "earshot/dram/payload_bytes.h"

namespace earshot {

DramController::DramController(sc_core::sc_module_name name, const DramConfig& config)
    : sc_module(name), config_(config), wake_("wake") {
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
  SC_HAS_PROCESS(DramController);
  SC_METHOD(work);
  sensitive << wake_;
  dont_initialize();
}

// The only process. Whatever is due now, in the order of cause and effect.
void DramController::work() {
  const Picoseconds now = now_ps();
  for (const auto& channel : channels_) {
    const Clocks next = channel->next_event();
    if (next == DramChannel::never || config_.grade.clock.edge(next) > now) continue;
    channel->advance(clock_now(), completions_);
  }
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
  request.first_burst = payload.get_address() / config_.burst_bytes();
  const std::uint64_t last = (payload.get_address() + (payload_extent(payload) - 1)) / config_.burst_bytes();
  request.bursts = static_cast<unsigned>(last - request.first_burst + 1);
  return id;
}

void DramController::arrive(unsigned id) {
  Request& request = *requests_[id];
  request.arrived = now_ps();
  const std::uint64_t last = request.first_burst + (request.bursts - 1);
  for (const Outstanding& older : outstanding_) {
    if (older.last_burst < request.first_burst || last < older.first_burst) continue;
    requests_[older.id]->followed = true;
    ++request.waits_for;
  }
  outstanding_.push_back({id, request.first_burst, last});
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
  DramBurst burst;
  burst.id = id;
  burst.write = payload.is_write();
  burst.number = request.first_burst + index;
  burst.place = map_->place(burst.number);
  if (burst.write && payload.get_byte_enable_ptr() != nullptr) return burst;  // which bytes is not known here
  const std::uint64_t begin = burst.number * config_.burst_bytes();
  const std::uint64_t address = payload.get_address();
  const std::uint64_t from = std::max(address, begin);
  const std::uint64_t until = std::min(address + payload_extent(payload), begin + config_.burst_bytes());
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
  const auto mine = std::find_if(outstanding_.begin(), outstanding_.end(),
                                 [id](const Outstanding& one) { return one.id == id; });
  const Outstanding own = *mine;
  auto next = outstanding_.erase(mine);
  if (request.blocking)
    request.responded.notify();
  else
    responses_.push_back(id);
  if (!request.followed) return;
  std::vector<unsigned> released;
  for (; next != outstanding_.end(); ++next)
    if (next->first_burst <= own.last_burst && own.first_burst <= next->last_burst &&
        --requests_[next->id]->waits_for == 0 && requests_[next->id]->complete)
      released.push_back(next->id);
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

// An sc_event keeps the earliest of the times it is told.
void DramController::schedule() {
  Picoseconds next = ~Picoseconds{0};
  for (const auto& channel : channels_) {
    const Clocks event = channel->next_event();
    if (event != DramChannel::never) next = std::min(next, config_.grade.clock.edge(event));
  }
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
