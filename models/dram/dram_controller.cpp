// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The way of requests through the controller. The socket's side is in dram_controller_socket.cpp.
#include "earshot/dram/dram_controller.h"

#include <algorithm>

#include "earshot/dram/payload_bytes.h"
#include "earshot/timing/kernel.h"
#include "earshot/version_check.h"

namespace earshot {

DramController::DramController(sc_core::sc_module_name name, const DramConfig& config, HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)),
      config_(config),
      burst_bytes_(config.burst_bytes()),
      wake_("wake") {
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
    lanes_.push_back({std::make_unique<DramChannel>(config, c), 0, {}});
  EARSHOT_HAS_PROCESS(DramController);
  SC_METHOD(work);
  sensitive << wake_;
  dont_initialize();
}

// The only process. Whatever is due now, in the order of cause and effect.
void DramController::work() {
  const Picoseconds now = now_ps();
  if (wake_moment_.time == now && wake_moment_.clock != DramChannel::never)
    instant_ = {now, wake_moment_.clock, wake_moment_.clock};
  working_ = true;
  for (Lane& lane : lanes_) {
    lane.channel->advance(instant().passed, completions_);
    lane.caught_up = instant().passed + 1;
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
  working_ = false;
  schedule();
}

// Commands that nobody outside can see are issued late: when the next thing happens that depends on them.
// What comes at the instant of an edge finds the command of that edge issued, but for one that has become
// possible only at this instant.
void DramController::catch_up(Lane& lane) {
  const Clocks passed = instant().passed;
  if (passed < lane.caught_up) return;
  lane.caught_up = passed + 1;
  lane.channel->catch_up(passed);
}

// For who asks. The kernel puts off what happens at the time at which it pauses.
void DramController::catch_up() {
  for (Lane& lane : lanes_) {
    if (sc_core::sc_get_status() == sc_core::SC_RUNNING)
      catch_up(lane);
    else if (clock_now() > 0)
      lane.channel->catch_up(clock_now() - 1);
  }
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
    Lane& lane = lanes_[burst.place.channel];
    catch_up(lane);
    DramChannel& channel = *lane.channel;
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
    if (++request.finished != request.bursts) continue;
    const Clocks clock = request.done + latency();
    completing_.push({config_.grade.clock.edge(clock), clock, order_++, completion.id});
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

// A command that has become possible at this instant is issued before whatever comes later at this instant.
DramController::Moment DramController::wake_of(Lane& lane) const {
  Clocks next = lane.channel->next_event();
  if (next > instant().passed) next = lane.channel->next_column();
  if (next == DramChannel::never) return {};
  if (next != lane.wake.clock) lane.wake = {config_.grade.clock.edge(next), next};
  return lane.wake;
}

// An sc_event keeps the earliest of the times it is told.
void DramController::schedule() {
  if (working_) {
    // Done at its end. But the channels decide whether they go on with writes before they see what comes
    // next.
    for (Lane& lane : lanes_) lane.channel->next_event();
    return;
  }
  Moment next;
  const auto consider = [&](const Moment& moment) { next = moment.time < next.time ? moment : next; };
  for (Lane& lane : lanes_) consider(wake_of(lane));
  if (!completing_.empty()) consider({completing_.top().time, completing_.top().clock});
  if (!coming_.empty()) consider({coming_.top().time, DramChannel::never});
  if (!responses_.empty() && response_open_ == nobody) consider({response_from_, DramChannel::never});
  if (next.time == ~Picoseconds{0}) return;
  const Picoseconds now = now_ps();
  wake_.notify(next.time > now ? from_ps(next.time - now) : sc_core::SC_ZERO_TIME);
  wake_moment_ = next;
}

Picoseconds DramController::busy_time() const {
  Clocks busy = 0;
  for (unsigned c = 0; c < config_.channels; ++c)
    busy = std::max(busy, estimate_ ? estimate_->data_bus_busy(c) : lanes_[c].channel->data_bus_busy());
  return config_.grade.clock.edge(busy);
}

Picoseconds DramController::busy_until() const {
  Clocks end = estimate_ ? estimate_->last_data_end() : 0;
  for (const Lane& lane : lanes_) end = std::max(end, lane.channel->data_end());
  return config_.grade.clock.edge(end);
}

DramCounts DramController::counts() {
  if (estimate_) return estimate_->counts(clock_now());
  catch_up();
  DramCounts sum;
  for (const Lane& lane : lanes_) sum.add(lane.channel->counts(clock_now()));
  return sum;
}

const std::vector<CommandRecord>& DramController::commands(unsigned channel) {
  static const std::vector<CommandRecord> none;
  catch_up();
  return estimate_ ? none : lanes_[channel].channel->commands(clock_now());
}

std::vector<std::string> DramController::broken_laws() const {
  std::vector<std::string> broken;
  const auto add = [&](const std::string& law) { broken.push_back(std::string(name()) + ": " + law); };
  if (!entry_meter_.littles_law_holds(now_ps()))
    add("Little's law does not hold for the requests without a place");
  for (const Lane& lane : lanes_)
    for (const std::string& law : lane.channel->broken_laws(clock_now())) add(law);
  return broken;
}

std::vector<std::string> DramController::pending() {
  catch_up();
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
  for (const Lane& lane : lanes_)
    for (const std::string& line : lane.channel->pending()) add(line);
  if (response_open_ != nobody)
    add(std::to_string(responses_.size() + 1) + " responses; the first, to " + describe(response_open_) +
        ", waits for END_RESP from " + initiator_name());
  return lines;
}

}  // namespace earshot
