// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/dram_channel.h"

#include <sstream>

namespace earshot {

namespace {

// In time to precharge whatever has just been opened or written, before a refresh that can wait no longer.
Clocks refresh_warning(const Grade& grade) {
  constexpr Clocks other_ranks_commands = 16;
  return std::max(grade.tras, grade.write_to_precharge()) + std::max(grade.trp, grade.trp_all) + grade.tfaw +
         other_ranks_commands;
}

}  // namespace

DramChannel::DramChannel(const DramConfig& config, unsigned channel)
    : config_(config),
      channel_(channel),
      until_column_{std::min(config.grade.trp, config.grade.trp_all) + config.grade.trcd, config.grade.trcd},
      banks_(config.grade, config.ranks),
      bank_states_(banks_.count()),
      ranks_(config.ranks),
      reads_(false, config.read_queue, banks_.count()),
      writes_(true, config.write_queue, banks_.count()),
      ties_(banks_.count() + 1) {
  if (config.refresh == DramRefresh::off) return;

  const Grade& grade = config.grade;
  const bool per_bank = config.refresh == DramRefresh::per_bank;
  const Clocks interval = per_bank ? grade.trefi_bank : grade.trefi;
  const std::uint64_t postponable = std::uint64_t{grade.postponable} * (per_bank ? grade.banks() : 1);
  for (unsigned r = 0; r < config.ranks; ++r)  // the ranks take turns
    ranks_[r].debt =
        RefreshDebt(interval, interval - interval * r / config.ranks, postponable, refresh_warning(grade));
}

void DramChannel::enqueue(const DramBurst& burst, Clocks now, std::vector<DramCompletion>& completions) {
  catch_up_idle_time(now);
  const unsigned bank = banks_.number(burst.place.rank, burst.place.group, burst.place.bank);
  chosen_ = choice_stands(burst.write, bank, now);
  cursor_ = std::max(cursor_, now);
  if (burst.write) {
    if (!merge(burst)) append(writes_, burst, now);
    completions.push_back({burst.id, now, now});
  } else if (in_queued_write(burst)) {
    ++counts_.reads_from_queue;
    completions.push_back({burst.id, now, now + 1});
  } else {
    append(reads_, burst, now);
    if (!chosen_ || served_ != &reads_) return;
    BurstQueue::Turn& turn = reads_.turn_of(bank);
    if (!turn.known) learn(reads_, turn);
    turn.clock = no_sooner(std::max(turn.own, banks_.shared_from(turn.shared)));
    column_ = std::min(column_, turn.clock + until_column(turn.step));
    if (bank_states_[bank].shut != choices_) consider_turn(reads_, turn);
  }
}

bool DramChannel::merge(const DramBurst& burst) {
  const Slot slot = writes_.find(burst.number);
  if (slot == BurstQueue::none) return false;
  Entry& e = writes_[slot];
  ++counts_.writes_merged;
  if (burst.first <= e.last && e.first <= burst.last) {
    e.first = static_cast<std::uint16_t>(std::min<unsigned>(e.first, burst.first));
    e.last = static_cast<std::uint16_t>(std::max<unsigned>(e.last, burst.last));
  } else if (burst.last - burst.first > static_cast<unsigned>(e.last - e.first)) {
    e.first = static_cast<std::uint16_t>(burst.first);
    e.last = static_cast<std::uint16_t>(burst.last);
  }
  hold(slot);
  return true;
}

bool DramChannel::in_queued_write(const DramBurst& burst) const {
  const Slot slot = writes_.find(burst.number);
  return slot != BurstQueue::none && writes_[slot].first <= burst.first && burst.last <= writes_[slot].last;
}

void DramChannel::append(BurstQueue& queue, const DramBurst& burst, Clocks now) {
  if (empty()) occupied_since_ = now;
  Entry e;
  e.row = burst.place.row;
  e.order = next_order_++;
  e.id = burst.id;
  e.column = static_cast<unsigned>(burst.place.column);
  e.bank = banks_.number(burst.place.rank, burst.place.group, burst.place.bank);
  e.first = static_cast<std::uint16_t>(burst.first);
  e.last = static_cast<std::uint16_t>(burst.last);
  const Slot slot = queue.append(e, burst.number, now);
  if (queue.write()) hold(slot);
  ++bank_states_[e.bank].queued;
  ++ranks_[burst.place.rank].queued;
}

// A write, or what has just been merged into it, is younger than all queued reads of its burst.
void DramChannel::hold(Slot write) {
  Entry& e = writes_[write];
  if (e.older_reads != 0) --held_;
  e.older_reads = static_cast<std::uint16_t>(reads_.count(writes_.number(write)));
  if (e.older_reads != 0) ++held_;
  writes_.look_again(e.bank);
}

// Reads of one burst are served in order: those that a write waits for are the first to go.
void DramChannel::release(std::uint64_t number) {
  const Slot write = writes_.find(number);
  if (write == BurstQueue::none || writes_[write].older_reads == 0) return;
  if (--writes_[write].older_reads == 0) --held_;
  writes_.look_again(writes_[write].bank);
}

void DramChannel::remove(BurstQueue& queue, Slot slot, Clocks now) {
  const unsigned bank = queue[slot].bank;
  queue.remove(slot, now);
  --bank_states_[bank].queued;
  --ranks_[banks_.rank_of(bank)].queued;
  if (empty()) counts_.occupied += now - occupied_since_;
}

void DramChannel::bank_changed(unsigned bank) {
  reads_.look_again(bank);
  writes_.look_again(bank);
}

Clocks DramChannel::next_event() {
  if (empty()) return never;
  if (!chosen_) choose();
  return std::min(choice_.clock, change_);
}

Clocks DramChannel::next_column() {
  if (empty()) return never;
  return std::max(next_event(), column_);
}

void DramChannel::advance(Clocks now, std::vector<DramCompletion>& completions) {
  if (!empty()) run_until(now, completions);
}

void DramChannel::catch_up(Clocks now) {
  while (!empty() && next_event() <= now) {
    if (choice_.clock <= change_ && is_column(choice_.command)) return;
    run_until(next_event(), unused_);
  }
}

void DramChannel::run_until(Clocks now, std::vector<DramCompletion>& completions) {
  while (command_bus_free_ <= now) {
    if (empty()) skip_idle_refreshes(now);
    if (!chosen_) choose();
    const Clocks next = std::min(choice_.clock, change_);
    if (next > now) break;
    cursor_ = next;
    chosen_ = false;
    if (choice_.clock <= change_) issue(completions);
  }
}

void DramChannel::catch_up_idle_time(Clocks now) {
  if (!empty() || now == 0) return;
  run_until(now - 1, unused_);
  cursor_ = std::max(cursor_, now - 1);
}

// All but the last of the refreshes of a long idle time, when nobody wants to see them one by one.
void DramChannel::skip_idle_refreshes(Clocks now) {
  if (config_.log_commands || config_.refresh == DramRefresh::off) return;
  const bool per_bank = config_.refresh == DramRefresh::per_bank;
  const Grade& grade = config_.grade;
  if (per_bank ? grade.trfc_bank > grade.trefi_bank : grade.trfc > grade.trefi) return;
  for (unsigned r = 0; r < ranks_.size(); ++r) {
    Rank& rank = ranks_[r];
    const std::uint64_t owed = rank.debt.owed(now);
    if (owed < 2 || rank.begun || rank.debt.due() < cursor_ || banks_.open_banks(r) != 0) continue;
    rank.debt.pay(owed - 1);
    if (per_bank) {
      rank.next_bank = static_cast<unsigned>((rank.next_bank + owed - 1) % banks_.banks_of_rank());
      counts_.bank_refreshes += owed - 1;
    } else {
      counts_.refreshes += owed - 1;
    }
    chosen_ = false;
  }
}

void DramChannel::issue(std::vector<DramCompletion>& completions) {
  const Clocks now = cursor_;
  const unsigned bank = choice_.bank;
  const unsigned rank = banks_.rank_of(bank);
  command_bus_free_ = now + 1;
  if (choice_.priority == over_age) ++counts_.over_age;
  std::uint64_t row = 0;
  if (choice_.slot != BurstQueue::none) {
    Entry& e = (*choice_.queue)[choice_.slot];
    row = e.row;
    if (e.found == Found::nothing_yet) {
      e.started = now;
      e.found = choice_.command == DramCommand::activate    ? Found::closed
                : choice_.command == DramCommand::precharge ? Found::conflict
                                                            : Found::hit;
    }
  }
  switch (choice_.command) {
    case DramCommand::activate:
      ++counts_.activates;
      banks_.activate(bank, row, now);
      bank_changed(bank);
      break;
    case DramCommand::precharge:
      ++counts_.precharges;
      row = banks_.row(bank);
      banks_.precharge(bank, now);
      bank_changed(bank);
      if (choice_.priority == refresh_first) ranks_[rank].begun = true;
      break;
    case DramCommand::precharge_all:
      counts_.precharges += banks_.open_banks(rank);
      banks_.precharge_all(rank, now);
      for (unsigned b = bank; b < bank + banks_.banks_of_rank(); ++b) bank_changed(b);
      ranks_[rank].begun = true;
      break;
    case DramCommand::refresh:
      ++counts_.refreshes;
      banks_.refresh(rank, now);
      for (unsigned b = bank; b < bank + banks_.banks_of_rank(); ++b) bank_changed(b);
      pay(rank, now);
      break;
    case DramCommand::refresh_bank:
      ++counts_.bank_refreshes;
      banks_.refresh_bank(bank, now);
      bank_changed(bank);
      pay(rank, now);
      ranks_[rank].next_bank = (ranks_[rank].next_bank + 1) % banks_.banks_of_rank();
      break;
    case DramCommand::read:
    case DramCommand::read_precharge:
    case DramCommand::write:
    case DramCommand::write_precharge:
      issue_column(completions);
      return;
  }
  log(choice_.command, bank, row, 0);
}

void DramChannel::issue_column(std::vector<DramCompletion>& completions) {
  BurstQueue& queue = *choice_.queue;
  const Entry e = queue[choice_.slot];
  const std::uint64_t number = queue.number(choice_.slot);
  const Clocks now = cursor_;
  const bool write = queue.write();
  remove(queue, choice_.slot, now);
  const bool close = config_.rows == DramRows::closed && last_of_its_row(e);
  const Clocks end = banks_.column(e.bank, write, close, now);

  ++(write ? counts_.write_bursts : counts_.read_bursts);
  ++(e.found == Found::hit      ? counts_.row_hits
     : e.found == Found::closed ? counts_.row_closed
                                : counts_.row_conflicts);
  if (close) ++counts_.precharges;
  bank_changed(e.bank);
  beats_ += config_.grade.burst_length;
  const Clocks begin = now + (write ? config_.grade.cwl : config_.grade.cl);
  counts_.data_bus_busy += end - std::max(begin, data_end_);  // an overlap would break the law of the beats
  data_end_ = end;

  if (!write) {
    completions.push_back({e.id, e.started, end});
    if (held_ != 0) release(number);
  }
  log(write ? (close ? DramCommand::write_precharge : DramCommand::write)
            : (close ? DramCommand::read_precharge : DramCommand::read),
      e.bank, e.row, e.column);
}

bool DramChannel::last_of_its_row(const Entry& entry) const {
  for (const BurstQueue* queue : {&reads_, &writes_})
    for (Slot slot = queue->oldest(); slot != BurstQueue::none; slot = queue->after(slot))
      if ((*queue)[slot].bank == entry.bank && (*queue)[slot].row == entry.row) return false;
  return true;
}

void DramChannel::pay(unsigned rank, Clocks now) {
  RefreshDebt& debt = ranks_[rank].debt;
  counts_.most_postponed = std::max(counts_.most_postponed, debt.owed(now));
  debt.pay();
  ranks_[rank].begun = false;
}

void DramChannel::log(DramCommand command, unsigned bank, std::uint64_t row, std::uint64_t column) {
  if (!config_.log_commands) return;
  log_.push_back({cursor_, command, channel_, banks_.rank_of(bank), banks_.group_of(bank),
                  banks_.place_in_group(bank), row, column});
}

const std::vector<CommandRecord>& DramChannel::commands(Clocks now) {
  catch_up_idle_time(now);
  return log_;
}

DramCounts DramChannel::counts(Clocks now) {
  catch_up_idle_time(now);
  DramCounts counts = counts_;
  counts.elapsed = now;
  if (!empty()) counts.occupied += std::max(now, occupied_since_) - occupied_since_;
  for (unsigned r = 0; r < ranks_.size(); ++r) {
    const Clocks active = banks_.active(r, now);
    counts.rank_clocks_active += active;
    counts.rank_clocks_precharged += now - active;
  }
  return counts;
}

std::vector<std::string> DramChannel::broken_laws(Clocks now) const {
  std::vector<std::string> broken;
  const std::string where = "channel " + std::to_string(channel_) + ": ";
  const auto little = [&](const BurstQueue& queue, const char* name) {
    if (!queue.meter().littles_law_holds(std::max(now, cursor_)))
      broken.push_back(where + "Little's law does not hold for the " + name + " queue");
  };
  little(reads_, "read");
  little(writes_, "write");
  if (beats_ != 2 * counts_.data_bus_busy)
    broken.push_back(where + std::to_string(beats_) +
                     " beats, two each clock, but the data bus was busy for " +
                     std::to_string(counts_.data_bus_busy) + " clocks");
  return broken;
}

std::string DramChannel::describe(BurstQueue& queue) {
  const Entry& e = queue[queue.oldest()];
  std::ostringstream text;
  text << "channel " << channel_ << ", " << (queue.write() ? "write" : "read") << " queue: " << queue.size()
       << " of " << queue.capacity() << " bursts; the head, rank " << banks_.rank_of(e.bank) << " group "
       << banks_.group_of(e.bank) << " bank " << banks_.place_in_group(e.bank) << " row " << e.row
       << " column " << e.column << ", is there since clock " << e.arrived << " and waits for ";
  const Choice next = next_command(queue, queue.oldest());
  if (bank_states_[e.bank].shut == choices_)
    text << "a refresh";
  else if (e.older_reads != 0)
    text << "older reads of its burst";
  else
    text << name_of(next.command) << ", possible from clock " << next.clock;
  return text.str();
}

std::vector<std::string> DramChannel::pending() {
  std::vector<std::string> lines;
  if (!empty() && !chosen_) choose();
  for (BurstQueue* queue : {&reads_, &writes_})
    if (!queue->empty()) lines.push_back(describe(*queue));
  return lines;
}

}  // namespace earshot
