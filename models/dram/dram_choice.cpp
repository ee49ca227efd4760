// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Which command a channel issues next. First-ready scheduling: S. Rixner et al., Memory Access Scheduling,
// ISCA 2000, section 3.
#include "earshot/dram/dram_channel.h"

namespace earshot {

void DramChannel::choose() {
  choice_ = Choice{};
  change_ = never;
  column_ = 0;
  served_ = nullptr;
  some_shut_ = false;
  ++choices_;
  if (config_.refresh != DramRefresh::off) choose_refresh();
  if (!empty()) {
    if (in_order())
      choose_in_order();
    else
      choose_first_ready(queue_to_serve());
  }
  if (config_.rows == DramRows::idle_timeout) choose_idle_rows();
  chosen_ = true;
}

void DramChannel::choose_refresh() {
  const bool per_bank = config_.refresh == DramRefresh::per_bank;
  for (unsigned r = 0; r < ranks_.size(); ++r) {
    const Rank& rank = ranks_[r];
    const unsigned first = r * banks_.banks_of_rank();
    const unsigned bank = first + rank.next_bank;
    const bool forced = rank.begun || cursor_ >= rank.debt.last_call();
    const bool wanted = (per_bank ? bank_states_[bank].queued : rank.queued) == 0;
    if (forced) {
      some_shut_ = true;
      for (unsigned b = per_bank ? bank : first; b < (per_bank ? bank + 1 : first + banks_.banks_of_rank());
           ++b)
        bank_states_[b].shut = choices_;
    } else if (!wanted || cursor_ < rank.debt.due()) {
      look_again_at(wanted ? rank.debt.due() : rank.debt.last_call());
      continue;
    }
    if (per_bank && banks_.row(bank) != DramBanks::no_row)
      consider_for(bank, DramCommand::precharge, banks_.precharge_from(bank), refresh_first);
    else if (per_bank)
      consider_for(bank, DramCommand::refresh_bank, banks_.refresh_bank_from(bank), refresh_first);
    else if (banks_.open_banks(r) != 0)
      consider_for(first, DramCommand::precharge_all, banks_.precharge_all_from(r), refresh_first);
    else
      consider_for(first, DramCommand::refresh, banks_.refresh_from(r), refresh_first);
  }
}

DramStep DramChannel::step_of(const BurstQueue& queue, Slot slot) const {
  const Entry& e = queue[slot];
  const std::uint64_t row = banks_.row(e.bank);
  return row == DramBanks::no_row ? DramStep::activate
         : row != e.row           ? DramStep::precharge
         : queue.write()          ? DramStep::write
                                  : DramStep::read;
}

DramChannel::Choice DramChannel::next_command(BurstQueue& queue, Slot slot) const {
  const Entry& e = queue[slot];
  Choice choice;
  choice.order = e.order;
  choice.bank = e.bank;
  choice.queue = &queue;
  choice.slot = slot;
  const DramStep step = step_of(queue, slot);
  choice.priority = priority_of(step);
  choice.clock = no_sooner(banks_.from(e.bank, step));
  choice.command = command_of(step);
  return choice;
}

DramChannel::Slot DramChannel::oldest_free(const BurstQueue& queue) const {
  Slot slot = queue.oldest();
  while (slot != BurstQueue::none &&
         (queue[slot].older_reads != 0 || bank_states_[queue[slot].bank].shut == choices_))
    slot = queue.after(slot);
  return slot;
}

void DramChannel::choose_in_order() {
  Slot write = writes_.oldest();  // held if a younger write was merged into it
  while (write != BurstQueue::none && writes_[write].older_reads != 0) write = writes_.after(write);
  const Slot read = reads_.oldest();
  const bool write_first =
      read == BurstQueue::none || (write != BurstQueue::none && writes_[write].order < reads_[read].order);
  Choice choice = write_first ? next_command(writes_, write) : next_command(reads_, read);
  if (config_.scheduling == DramScheduling::one_at_a_time) choice.clock = std::max(choice.clock, data_end_);
  column_ = choice.clock + until_column(step_of(*choice.queue, choice.slot));
  if (bank_states_[choice.bank].shut != choices_) consider(choice);
}

BurstQueue& DramChannel::queue_to_serve() {
  const unsigned ready = writes_.size() - held_;
  if (draining_ && (writes_.size() <= config_.write_low || ready == 0)) draining_ = false;
  if (!draining_ && writes_.size() >= config_.write_high && ready != 0) {
    draining_ = true;
    ++counts_.write_drains;
  }
  return draining_ || reads_.empty() ? writes_ : reads_;
}

void DramChannel::choose_first_ready(BurstQueue& queue) {
  // A request over age: no other column command goes, no other command to its bank, and no activation while
  // it waits for its own.
  Choice aged;
  if (cursor_ < queue[queue.oldest()].arrived + config_.age_cap) {
    look_again_at(queue[queue.oldest()].arrived + config_.age_cap);
  } else if (const Slot slot = oldest_free(queue); slot == BurstQueue::none) {
    return;
  } else if (cursor_ < queue[slot].arrived + config_.age_cap) {
    look_again_at(queue[slot].arrived + config_.age_cap);
  } else {
    aged = next_command(queue, slot);
    aged.priority = over_age;
    consider(aged);
  }
  if (aged.queue == nullptr) served_ = &queue;
  Clocks first = find_clocks(queue);
  if (some_shut_ || aged.queue != nullptr) {
    first = never;
    for (BurstQueue::Turn& turn : queue.turns()) {
      if (bank_states_[turn.bank].shut == choices_ || (aged.queue != nullptr && gives_way(turn, aged)))
        turn.clock = never;
      first = std::min(first, turn.clock);
    }
  }
  if (first <= choice_.clock && first < out_of_reach) consider_turns(queue, first);
}

bool DramChannel::gives_way(const BurstQueue::Turn& turn, const Choice& aged) {
  return turn.bank == aged.bank || turn.step >= DramStep::read ||
         (turn.step == DramStep::activate && aged.command == DramCommand::activate);
}

// When each bank can take its step; the first of these clocks. Here and in consider_turns() the scheduler
// spends its time: loops without branches that nobody can predict, which is why they compare values and not,
// as std::min() does, references.
Clocks DramChannel::find_clocks(BurstQueue& queue) {
  queue.for_unknown_turns([&](BurstQueue::Turn& turn) { learn(queue, turn); });
  const Clocks floor = no_sooner(0);
  Clocks first = never, column = never;
  for (BurstQueue::Turn& turn : queue.turns()) {
    const Clocks own = turn.own < floor ? floor : turn.own;
    const Clocks shared = banks_.shared_from(turn.shared);
    const Clocks clock = own < shared ? shared : own;
    const Clocks then = clock + until_column(turn.step);
    turn.clock = clock;
    first = clock < first ? clock : first;
    column = then < column ? then : column;
  }
  column_ = column;
  return first;
}

// Of those possible at this clock the one with the lowest place. REQUIRES: there is one.
void DramChannel::consider_turns(BurstQueue& queue, Clocks first) {
  std::size_t found = 0;
  for (const BurstQueue::Turn& turn : queue.turns()) {
    ties_[found] = &turn;  // overwritten by the next one if it is none
    found += turn.clock == first ? 1 : 0;
  }
  const BurstQueue::Turn* best = ties_[0];
  for (std::size_t i = 1; i < found; ++i)
    if (ties_[i]->place < best->place) best = ties_[i];
  consider_turn(queue, *best);
}

void DramChannel::learn(BurstQueue& queue, BurstQueue::Turn& turn) const {
  queue.know(turn, banks_.row(turn.bank));
  turn.own = turn.slot == BurstQueue::none ? out_of_reach : banks_.own_from(turn.bank, turn.step);
  turn.shared = banks_.shared(turn.bank, turn.step);
  turn.place = std::uint64_t{priority_of(turn.step)} << 60 | turn.order;  // no run has 2^60 bursts
}

void DramChannel::consider_turn(BurstQueue& queue, const BurstQueue::Turn& turn) {
  const Priority priority = priority_of(turn.step);
  if (!goes_first(turn.clock, priority, turn.order)) return;
  choice_.clock = turn.clock;
  choice_.priority = priority;
  choice_.order = turn.order;
  choice_.command = command_of(turn.step);
  choice_.bank = turn.bank;
  choice_.queue = &queue;
  choice_.slot = turn.slot;
}

// Whether choose(), after a burst has come to this bank, would find the same as before, but for this burst.
// Everything else is possible at choice_.clock or later, so time alone changes nothing before change_.
// Refresh and idle rows depend on which banks have no bursts, the queue to serve on the number of writes and
// on whether there are reads.
bool DramChannel::choice_stands(bool write, unsigned bank, Clocks now) const {
  if (!chosen_ || served_ == nullptr || now >= change_ || now > choice_.clock || reads_.empty()) return false;
  if (bank == choice_.bank) return false;  // a hit would take the place of the precharge chosen
  if (write && (served_ == &writes_ || writes_.size() + 1 >= config_.write_high)) return false;
  const bool by_rank = config_.refresh != DramRefresh::per_bank && config_.rows != DramRows::idle_timeout;
  return (by_rank ? ranks_[banks_.rank_of(bank)].queued : bank_states_[bank].queued) != 0;
}

void DramChannel::choose_idle_rows() {
  for (unsigned b = 0; b < banks_.count(); ++b) {
    if (banks_.row(b) == DramBanks::no_row || bank_states_[b].queued != 0) continue;
    consider_for(b, DramCommand::precharge,
                 std::max(banks_.last_use(b) + config_.idle_timeout, banks_.precharge_from(b)), idle_last);
  }
}

}  // namespace earshot
