// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A DRAM channel driven by hand, without a kernel. Every command it issues is judged when its log is asked
// for.
#pragma once

#include <algorithm>
#include <vector>

#include "dram/command_checker.h"
#include "earshot/dram/dram_channel.h"

namespace earshot {

// Without refresh and with a log; the rest is the default.
inline DramConfig quiet(const Grade& grade) {
  DramConfig config;
  config.grade = grade;
  config.refresh = DramRefresh::off;
  config.log_commands = true;
  return config;
}

struct DramRequest {
  bool write = false;
  DramPlace place;
};

class DrivenChannel {
 public:
  explicit DrivenChannel(const DramConfig& config) : config_(config), map_(config), channel_(config) {}

  // At `clock`, or later if the channel has gone further. The number of the request.
  unsigned put(const DramRequest& request, Clocks clock) {
    while (channel_.next_event() < clock) step();
    now_ = std::max(now_, clock);
    DramBurst burst;
    burst.id = static_cast<unsigned>(done_.size());
    burst.write = request.write;
    burst.place = request.place;
    burst.number = map_.burst(request.place);
    burst.last = config_.burst_bytes();
    done_.push_back(not_done);
    channel_.enqueue(burst, now_, completions_);
    note();
    return burst.id;
  }

  // As soon after `clock` as the channel takes it; when that was.
  Clocks put_when_accepted(const DramRequest& request, Clocks clock) {
    while (channel_.next_event() < clock) step();
    now_ = std::max(now_, clock);
    while (!channel_.accepts(request.write)) step();
    put(request, now_);
    return now_;
  }

  // Until nothing is queued.
  void finish() {
    while (channel_.next_event() != DramChannel::never) step();
  }

  // All of them, each as soon as the channel takes it.
  void stream(const std::vector<DramRequest>& requests) {
    for (const DramRequest& request : requests) put_when_accepted(request, 0);
    finish();
  }

  // From arrival at an idle channel to the end of the last beat.
  Clocks latency(const DramRequest& request, Clocks clock) {
    const unsigned id = put(request, clock);
    finish();
    return done_[id] - clock;
  }

  Clocks done(unsigned id) const { return done_[id]; }
  bool all_done() const {
    return std::all_of(done_.begin(), done_.end(), [](Clocks done) { return done != not_done; });
  }
  Clocks now() const { return now_; }
  DramChannel& channel() { return channel_; }

  std::vector<CommandRecord> legal_log(Clocks end = 0) {
    const std::vector<CommandRecord> log = channel_.commands(std::max(now_ + 1, end));
    require_legal(log, config_, end);
    return log;
  }

  // Of those in the log.
  std::vector<Clocks> clocks_of(DramCommand command) {
    std::vector<Clocks> clocks;
    for (const CommandRecord& each : legal_log()) {
      if (each.command == command) clocks.push_back(each.clock);
    }
    return clocks;
  }

 private:
  void step() {
    now_ = std::max(now_, channel_.next_event());
    channel_.advance(now_, completions_);
    note();
  }
  void note() {
    for (const DramCompletion& completion : completions_) done_[completion.id] = completion.done;
    completions_.clear();
  }

  static constexpr Clocks not_done = ~Clocks{0};

  const DramConfig config_;
  const DramAddressMap map_;
  DramChannel channel_;
  Clocks now_ = 0;
  std::vector<DramCompletion> completions_;
  std::vector<Clocks> done_;  // by the number of the request
};

// A place in rank 0; banks are counted with the groups turning fastest.
inline DramPlace place(const Grade& grade, unsigned bank, std::uint64_t row, std::uint64_t column = 0) {
  DramPlace result;
  result.group = bank % grade.bank_groups;
  result.bank = bank / grade.bank_groups % grade.banks_per_group;
  result.row = row;
  result.column = column;
  return result;
}

}  // namespace earshot
