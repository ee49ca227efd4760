// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A DramChannel is the controller of one channel: its queues of bursts, and the scheduler that turns them
// into commands, at most one each clock and each as early as the constraints allow. Kernel-free: time is the
// clocks that the caller gives, never decreasing from call to call.
//
// It is driven by events. After every enqueue() and advance(), call advance() when next_event() has come, or
// sooner. With nothing queued there is no event: refreshes, and rows closed for being idle, are caught up
// with when the next request arrives or somebody asks.
//
// Reads and writes to one burst. The caller moves the bytes at enqueue(), in that order, so the order of
// arrival is the order of memory; here is only time. Still the commands keep to it: a write never goes to the
// banks before an older read of its burst. A read whose bytes are all in queued writes is served from there,
// one clock later.
//
// Refresh (JESD79-3 and -4: 8 may be postponed): done when due if nothing is queued for the rank (per-bank
// refresh: for the bank), else postponed as long as the grade allows. Once it has begun, or can wait no
// longer, the rank (the bank) takes no other commands until it is done.
#pragma once

#include <limits>
#include <string>
#include <vector>

#include "earshot/dram/burst_queue.h"
#include "earshot/dram/command.h"
#include "earshot/dram/dram_address_map.h"
#include "earshot/dram/dram_banks.h"
#include "earshot/dram/dram_config.h"
#include "earshot/dram/dram_counts.h"
#include "earshot/dram/refresh_debt.h"

namespace earshot {

// What is asked of a channel: one burst.
struct DramBurst {
  unsigned id = 0;  // the caller's, told again with the completion
  bool write = false;
  std::uint64_t number = 0;  // address / burst_bytes
  DramPlace place;
  unsigned first = 0, last = 0;  // [first, last): the bytes of the burst that it touches, all of them
};

struct DramCompletion {
  unsigned id = 0;
  Clocks started = 0;  // the first command issued for it; of a write: when it was queued
  Clocks done = 0;     // the end of its last beat; of a write: when it was queued
};

class DramChannel {
 public:
  static constexpr Clocks never = std::numeric_limits<Clocks>::max();

  // REQUIRES: config.problems() is empty, but for toy grades: as far as the problems are the grade's.
  explicit DramChannel(const DramConfig& config, unsigned channel = 0);

  bool accepts(bool write) const { return !(write ? writes_ : reads_).full(); }
  // Appends to `completions` if it is complete at once: a write, or a read served from a queued write.
  // REQUIRES: accepts(burst.write); advance() has been called for every event before `now`.
  void enqueue(const DramBurst& burst, Clocks now, std::vector<DramCompletion>& completions);

  Clocks next_event();
  // For who would rather not come for every event. No read or write command is issued before next_column(),
  // unless more is queued: until then nothing completes and no queue gets room. So it is enough to call
  // advance() then, and before anything else at a clock `now` catch_up(now), which issues every command up to
  // and including `now`, but no read or write.
  Clocks next_column();
  void catch_up(Clocks now);
  // Issues every command up to and including `now`. Appends reads, whose `done` may be later than `now`, in
  // that order.
  void advance(Clocks now, std::vector<DramCompletion>& completions);

  // The rest tells what has happened before `now`. REQUIRES: as for enqueue().
  DramCounts counts(Clocks now);
  const std::vector<CommandRecord>& commands(Clocks now);  // if config.log_commands
  // In clocks. A read is queued until its column command is issued, and so is a write.
  const QueueMeter& read_meter() const { return reads_.meter(); }
  const QueueMeter& write_meter() const { return writes_.meter(); }
  Clocks data_bus_busy() const { return counts_.data_bus_busy; }
  Clocks data_end() const { return data_end_; }  // of the last burst

  std::vector<std::string> broken_laws(Clocks now) const;  // empty if all hold
  // Each queue, its head and what that waits for; empty if nothing is queued.
  std::vector<std::string> pending();

 private:
  using Slot = BurstQueue::Slot;
  using Entry = BurstQueue::Entry;
  using Found = BurstQueue::Found;

  struct BankState {
    std::uint64_t shut = 0;  // the number of the latest choice for which refresh kept the bank for itself
    unsigned queued = 0;     // bursts, in both queues
  };
  struct Rank {
    RefreshDebt debt;
    unsigned next_bank = 0;  // of the rank, to refresh next
    unsigned queued = 0;     // bursts
    bool begun = false;      // precharged for the refresh that comes next
  };
  static constexpr Clocks out_of_reach = never / 2;  // the clock of a bank all of whose bursts are held
  enum Priority : unsigned { refresh_first, over_age, first_kind, second_kind, third_kind, idle_last };
  // The command to issue next, if nothing arrives before.
  struct Choice {
    Clocks clock = never;
    unsigned priority = 0;    // of those possible at one clock; the lowest goes
    std::uint64_t order = 0;  // of arrival; the first goes
    DramCommand command = DramCommand::refresh;
    unsigned bank = 0;  // for a rank: its first
    BurstQueue* queue = nullptr;
    Slot slot = BurstQueue::none;
  };

  bool empty() const { return reads_.empty() && writes_.empty(); }
  bool in_order() const { return config_.scheduling != DramScheduling::first_ready; }

  // dram_channel.cpp
  bool merge(const DramBurst& burst);
  bool in_queued_write(const DramBurst& burst) const;
  void append(BurstQueue& queue, const DramBurst& burst, Clocks now);
  void hold(Slot write);
  void release(std::uint64_t number);
  void remove(BurstQueue& queue, Slot slot, Clocks now);
  void bank_changed(unsigned bank);
  void run_until(Clocks now, std::vector<DramCompletion>& completions);
  void catch_up_idle_time(Clocks now);
  void skip_idle_refreshes(Clocks now);
  void issue(std::vector<DramCompletion>& completions);
  void issue_column(std::vector<DramCompletion>& completions);
  bool last_of_its_row(const Entry& entry) const;
  void pay(unsigned rank, Clocks now);
  void log(DramCommand command, unsigned bank, std::uint64_t row, std::uint64_t column);
  std::string describe(BurstQueue& queue);

  // dram_choice.cpp
  void choose();
  void choose_refresh();
  void choose_in_order();
  void choose_first_ready(BurstQueue& queue);
  void choose_idle_rows();
  BurstQueue& queue_to_serve();
  Slot oldest_free(const BurstQueue& queue) const;
  Choice next_command(BurstQueue& queue, Slot slot) const;
  bool choice_stands(bool write, unsigned bank, Clocks now) const;
  DramStep step_of(const BurstQueue& queue, Slot slot) const;
  static bool gives_way(const BurstQueue::Turn& turn, const Choice& aged);
  Clocks find_clocks(BurstQueue& queue);
  void consider_turns(BurstQueue& queue, Clocks first);
  void learn(BurstQueue& queue, BurstQueue::Turn& turn) const;
  void consider_turn(BurstQueue& queue, const BurstQueue::Turn& turn);
  static bool is_column(DramCommand command) {
    return command == DramCommand::read || command == DramCommand::write;
  }
  static DramCommand command_of(DramStep step) {
    if (step >= DramStep::read) return step == DramStep::read ? DramCommand::read : DramCommand::write;
    return step == DramStep::activate ? DramCommand::activate : DramCommand::precharge;
  }
  Priority priority_of(DramStep step) const {
    if (step >= DramStep::read) return config_.row_first ? third_kind : first_kind;
    return step == DramStep::activate || !config_.row_first ? second_kind : first_kind;
  }
  bool goes_first(Clocks clock, unsigned priority, std::uint64_t order) const {
    if (clock != choice_.clock) return clock < choice_.clock;
    if (priority != choice_.priority) return priority < choice_.priority;
    return order < choice_.order;
  }
  void consider(const Choice& choice) {
    if (goes_first(choice.clock, choice.priority, choice.order)) choice_ = choice;
  }
  void consider_for(unsigned bank, DramCommand command, Clocks clock, Priority priority) {
    Choice choice;
    choice.clock = no_sooner(clock);
    choice.priority = priority;
    choice.command = command;
    choice.bank = bank;
    consider(choice);
  }
  Clocks until_column(DramStep step) const { return until_column_[static_cast<std::size_t>(step)]; }
  void look_again_at(Clocks clock) { change_ = std::min(change_, clock); }
  Clocks no_sooner(Clocks clock) const { return std::max({clock, cursor_, command_bus_free_}); }

  const DramConfig config_;
  const unsigned channel_;
  const std::array<Clocks, dram_steps> until_column_;  // at least, from a bank's next step
  DramBanks banks_;
  std::vector<BankState> bank_states_;
  std::vector<Rank> ranks_;
  BurstQueue reads_, writes_;
  unsigned held_ = 0;  // writes that wait for older reads
  bool draining_ = false;
  std::uint64_t next_order_ = 0;
  std::uint64_t choices_ = 0;

  Clocks cursor_ = 0;  // everything before has happened
  Clocks command_bus_free_ = 0;
  bool chosen_ = false;  // what follows is valid
  Choice choice_;
  Clocks column_ = 0;      // no column command comes before
  Clocks change_ = never;  // when another choice may be due although nothing arrives
  BurstQueue* served_ = nullptr;  // the queue whose banks all took part, if not limited by a request over age
  bool some_shut_ = false;
  std::vector<const BurstQueue::Turn*> ties_;  // room for as many as there are banks, and one more

  DramCounts counts_;
  std::uint64_t beats_ = 0;
  Clocks data_end_ = 0;
  Clocks occupied_since_ = 0;
  std::vector<CommandRecord> log_;
  std::vector<DramCompletion> unused_;  // idle time completes nothing
};

}  // namespace earshot
