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
  ++stamp_;
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
    const bool wanted = (per_bank ? scan_[bank].queued : rank.queued) == 0;
    if (forced) {
      for (unsigned b = per_bank ? bank : first; b < (per_bank ? bank + 1 : first + banks_.banks_of_rank()); ++b)
        scan_[b].shut = stamp_;
    } else if (!wanted || cursor_ < rank.debt.due()) {
      look_again_at(wanted ? rank.debt.due() : rank.debt.last_call());
      continue;
    }
    if (per_bank && banks_.row(bank) != DramBanks::no_row)
      consider({no_sooner(banks_.precharge_from(bank)), refresh_first, DramCommand::precharge, bank, nullptr, none});
    else if (per_bank)
      consider({no_sooner(banks_.refresh_bank_from(bank)), refresh_first, DramCommand::refresh_bank, bank, nullptr,
                none});
    else if (banks_.open_banks(r) != 0)
      consider({no_sooner(banks_.precharge_all_from(r)), refresh_first, DramCommand::precharge_all, first, nullptr,
                none});
    else
      consider({no_sooner(banks_.refresh_from(r)), refresh_first, DramCommand::refresh, first, nullptr, none});
  }
}

DramChannel::Choice DramChannel::next_command(Queue& queue, std::size_t entry) const {
  const Entry& e = queue.entries[entry];
  const std::uint64_t row = banks_.row(e.bank);
  const bool row_first = config_.row_first;
  if (row == e.row)
    return {no_sooner(banks_.column_from(e.bank, queue.write)), row_first ? third_kind : first_kind,
            queue.write ? DramCommand::write : DramCommand::read, e.bank, &queue, entry};
  if (row == DramBanks::no_row)
    return {no_sooner(banks_.activate_from(e.bank)), second_kind, DramCommand::activate, e.bank, &queue, entry};
  return {no_sooner(banks_.precharge_from(e.bank)), row_first ? first_kind : second_kind, DramCommand::precharge,
          e.bank, &queue, entry};
}

void DramChannel::choose_in_order() {
  Queue* oldest = reads_.entries.empty() ? nullptr : &reads_;
  std::size_t entry = 0;
  for (std::size_t i = 0; i < writes_.entries.size(); ++i) {
    const Entry& e = writes_.entries[i];
    if (e.older_reads != 0) continue;  // a younger write was merged into it
    if (oldest == nullptr || e.order < oldest->entries.front().order) {
      oldest = &writes_;
      entry = i;
    }
    break;
  }
  const Entry& e = oldest->entries[entry];
  if (scan_[e.bank].shut == stamp_) return;
  Choice choice = next_command(*oldest, entry);
  if (config_.scheduling == DramScheduling::one_at_a_time) choice.clock = std::max(choice.clock, data_end_);
  consider(choice);
}

DramChannel::Queue& DramChannel::queue_to_serve() {
  const std::size_t ready = writes_.entries.size() - writes_.held;
  if (draining_ && (writes_.entries.size() <= config_.write_low || ready == 0)) draining_ = false;
  if (!draining_ && writes_.entries.size() >= config_.write_high && ready != 0) {
    draining_ = true;
    ++counts_.write_drains;
  }
  return draining_ || reads_.entries.empty() ? writes_ : reads_;
}

void DramChannel::choose_first_ready(Queue& queue) {
  const std::vector<Entry>& entries = queue.entries;
  const auto may_go = [&](const Entry& e) { return e.older_reads == 0 && scan_[e.bank].shut != stamp_; };

  // The oldest one, if it is over the age: no other column command goes, no other one to its bank, and no activation
  // while it waits for its own.
  std::size_t oldest = 0;
  while (oldest < entries.size() && !may_go(entries[oldest])) ++oldest;
  if (oldest == entries.size()) return;
  Choice aged;
  if (cursor_ >= entries[oldest].arrived + config_.age_cap) {
    aged = next_command(queue, oldest);
    aged.priority = over_age;
    consider(aged);
    scan_[aged.bank].hit = stamp_;
  } else {
    look_again_at(entries[oldest].arrived + config_.age_cap);
    for (std::size_t i = oldest; i < entries.size(); ++i) {
      BankScan& scan = scan_[entries[i].bank];
      if (banks_.row(entries[i].bank) != entries[i].row || scan.hit == stamp_ || !may_go(entries[i])) continue;
      scan.hit = stamp_;  // younger hits of the bank cannot be sooner
      consider(next_command(queue, i));
    }
  }

  for (std::size_t i = oldest; i < entries.size(); ++i) {
    BankScan& scan = scan_[entries[i].bank];
    if (scan.hit == stamp_ || scan.miss == stamp_ || !may_go(entries[i])) continue;
    scan.miss = stamp_;
    const Choice choice = next_command(queue, i);
    if (aged.queue != nullptr && choice.command != DramCommand::precharge &&
        (choice.command != DramCommand::activate || aged.command == DramCommand::activate))
      continue;
    consider(choice);
  }
}

void DramChannel::choose_idle_rows() {
  for (unsigned b = 0; b < banks_.count(); ++b) {
    if (banks_.row(b) == DramBanks::no_row || scan_[b].queued != 0) continue;
    const Clocks timeout = banks_.last_use(b) + config_.idle_timeout;
    consider({no_sooner(std::max(timeout, banks_.precharge_from(b))), idle_last, DramCommand::precharge, b, nullptr,
              none});
  }
}

}  // namespace earshot
