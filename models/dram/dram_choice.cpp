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

DramChannel::Choice DramChannel::next_command(BurstQueue& queue, Slot slot) const {
  const Entry& e = queue[slot];
  const std::uint64_t row = banks_.row(e.bank);
  Choice choice;
  choice.order = e.order;
  choice.bank = e.bank;
  choice.queue = &queue;
  choice.slot = slot;
  choice.priority = priority_of(row == e.row, row == DramBanks::no_row);
  if (row == e.row) {
    choice.clock = no_sooner(banks_.column_from(e.bank, queue.write()));
    choice.command = queue.write() ? DramCommand::write : DramCommand::read;
  } else if (row == DramBanks::no_row) {
    choice.clock = no_sooner(banks_.activate_from(e.bank));
    choice.command = DramCommand::activate;
  } else {
    choice.clock = no_sooner(banks_.precharge_from(e.bank));
    choice.command = DramCommand::precharge;
  }
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
  if (bank_states_[choice.bank].shut == choices_) return;
  if (config_.scheduling == DramScheduling::one_at_a_time) choice.clock = std::max(choice.clock, data_end_);
  consider(choice);
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
  // Here the scheduler spends its time: no Choice is made for banks whose turn it cannot be.
  const Clocks floor = no_sooner(0);
  for (const unsigned bank : queue.banks()) {
    if (bank_states_[bank].shut == choices_) continue;
    const std::uint64_t row = banks_.row(bank);
    const Slot slot = queue.pick(bank, row);
    if (slot == BurstQueue::none) continue;
    const bool column = row == queue[slot].row;
    const bool activate = row == DramBanks::no_row;
    const Clocks from = column     ? banks_.column_from(bank, queue.write())
                        : activate ? banks_.activate_from(bank)
                                   : banks_.precharge_from(bank);
    if (!goes_first(std::max(from, floor), priority_of(column, activate), queue[slot].order)) continue;
    if (aged.queue != nullptr &&
        (bank == aged.bank || column || (activate && aged.command == DramCommand::activate)))
      continue;
    consider(next_command(queue, slot));
  }
}

void DramChannel::choose_idle_rows() {
  for (unsigned b = 0; b < banks_.count(); ++b) {
    if (banks_.row(b) == DramBanks::no_row || bank_states_[b].queued != 0) continue;
    consider_for(b, DramCommand::precharge,
                 std::max(banks_.last_use(b) + config_.idle_timeout, banks_.precharge_from(b)), idle_last);
  }
}

}  // namespace earshot
