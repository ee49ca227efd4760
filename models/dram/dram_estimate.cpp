// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/dram_estimate.h"

#include <algorithm>

namespace earshot {

DramEstimate::DramEstimate(const DramConfig& config)
    : config_(config),
      far_ahead_(8 * Clocks{config.grade.trc}),
      channels_(config.channels),
      ranks_(std::size_t{config.channels} * config.ranks),
      group_read_from_(ranks_.size() * config.grade.bank_groups),
      group_write_from_(group_read_from_.size()),
      banks_(ranks_.size() * config.grade.banks()) {}

DramEstimate::Refreshes DramEstimate::refreshes_of(unsigned rank, unsigned bank) const {
  const Grade& grade = config_.grade;
  if (config_.refresh == DramRefresh::off) return {};
  const Clocks each = config_.refresh == DramRefresh::all_bank ? grade.trefi : grade.trefi_bank;
  const Clocks first = each - each * rank / config_.ranks;
  if (config_.refresh == DramRefresh::all_bank) return {first, each, grade.trfc};
  return {first + bank * each, grade.banks() * each, grade.trfc_bank};
}

Clocks DramEstimate::after_refresh(const Bank& bank, const Rank& rank, const Refreshes& refreshes,
                                   Clocks ready) const {
  const Clocks number = refreshes.due_before(ready);
  if (number == 0) return ready;
  const Clocks due = refreshes.due(number);
  Clocks precharge = 0;
  if (config_.refresh == DramRefresh::all_bank) {
    if (rank.active_until == due) precharge = config_.grade.trp_all;
  } else if (bank.open && bank.refreshes + 1 == number) {
    precharge = config_.grade.trp;
  }
  return std::max(ready, due + precharge + refreshes.length);
}

bool DramEstimate::still_open(const Bank& bank, const Refreshes& refreshes, Clocks ready) const {
  if (!bank.open || refreshes.due_before(ready) > bank.refreshes) return false;
  return config_.rows != DramRows::idle_timeout || ready <= bank.last_use + config_.idle_timeout;
}

Clocks DramEstimate::wait_for(Clocks from, Clocks ready) const {
  return from > ready + far_ahead_ ? ready : std::max(from, ready);
}

DramEstimate::Times DramEstimate::access(const DramPlace& place, bool write, Clocks ready) {
  const Grade& grade = config_.grade;
  const std::size_t r = std::size_t{place.channel} * config_.ranks + place.rank;
  const std::size_t g = r * grade.bank_groups + place.group;
  Rank& rank = ranks_[r];
  Bank& bank = banks_[g * grade.banks_per_group + place.bank];
  const Refreshes refreshes = refreshes_of(place.rank, place.group * grade.banks_per_group + place.bank);

  const bool open = still_open(bank, refreshes, ready);
  const bool hit = open && bank.row == place.row;
  ++(hit ? counts_.row_hits : open ? counts_.row_conflicts : counts_.row_closed);
  ++(write ? counts_.write_bursts : counts_.read_bursts);

  Calendar& data_bus = channels_[place.channel].data_bus;
  bank.row_cycles.forget_before(now_);
  rank.activations.forget_before(now_);
  data_bus.forget_before(now_);

  Clocks started = 0;
  Clocks column =
      hit ? wait_for(bank.column_from, ready)
          : open_row(bank, rank, refreshes, open, after_refresh(bank, rank, refreshes, ready), started);
  column = wait_for(write ? rank.write_from : rank.read_from, column);
  column = wait_for(write ? group_write_from_[g] : group_read_from_[g], column);

  const Clocks latency = write ? grade.cwl : grade.cl;
  const Clocks data = data_bus.book(column + latency, grade.burst_clocks());
  column = data - latency;
  if (hit) started = column;
  bank.row = place.row;
  bank.open = config_.rows != DramRows::closed;
  bank.refreshes = refreshes.due_before(column);
  bank.last_use = column;
  bank.precharge_from = column + (write ? grade.write_to_precharge() : grade.trtp);
  group_read_from_[g] = column + (write ? grade.write_to_read_l() : grade.tccd_l);
  group_write_from_[g] = column + (!write                 ? grade.read_to_write
                                   : grade.tccd_l_wr != 0 ? grade.tccd_l_wr
                                                          : grade.tccd_l);
  if (write)
    rank.read_from = column + grade.write_to_read_s();
  else
    rank.write_from = column + grade.read_to_write;
  return {started, data + grade.burst_clocks()};
}

// The clock from which the column command may come.
Clocks DramEstimate::open_row(Bank& bank, Rank& rank, const Refreshes& refreshes, bool conflict, Clocks ready,
                              Clocks& started) {
  const Grade& grade = config_.grade;
  const bool shut_after = config_.rows == DramRows::closed;
  const Clocks before = conflict ? grade.trp : 0;
  const Clocks from = conflict ? bank.precharge_from : shut_after ? bank.precharge_from + grade.trp : 0;
  started = bank.row_cycles.book(wait_for(from, ready), before + (shut_after ? grade.trc : grade.tras));
  const Clocks activate =
      rank.activations.book(started + before, std::max<Clocks>(grade.trrd_s, (grade.tfaw + 3) / 4));
  if (!conflict) started = activate;
  ++counts_.activates;
  if (conflict || shut_after) ++counts_.precharges;
  bank.column_from = activate + grade.trcd;
  count_active(rank, refreshes, activate);
  return bank.column_from;
}

void DramEstimate::count_active(Rank& rank, const Refreshes& refreshes, Clocks activate) {
  const Clocks closes =
      config_.rows == DramRows::closed
          ? activate + config_.grade.tras
          : (refreshes.interval == 0 ? ~Clocks{0} : refreshes.due(refreshes.due_before(activate) + 1));
  if (activate >= rank.active_until) {
    rank.active += rank.active_until - rank.active_since;
    rank.active_since = activate;
  }
  rank.active_until = std::max(rank.active_until, closes);
}

DramCounts DramEstimate::counts(Clocks now) const {
  DramCounts counts = counts_;
  counts.elapsed = now;
  for (const Channel& channel : channels_) counts.data_bus_busy += channel.data_bus.busy_time();
  for (std::size_t r = 0; r < ranks_.size(); ++r) {
    const Rank& rank = ranks_[r];
    const unsigned of_channel = static_cast<unsigned>(r % config_.ranks);
    if (config_.refresh == DramRefresh::all_bank)
      counts.refreshes += refreshes_of(of_channel, 0).due_before(now);
    if (config_.refresh == DramRefresh::per_bank)
      for (unsigned b = 0; b < config_.grade.banks(); ++b)
        counts.bank_refreshes += refreshes_of(of_channel, b).due_before(now);
    const Clocks until = std::min(now, rank.active_until);
    const Clocks active =
        std::min(now, rank.active + (until > rank.active_since ? until - rank.active_since : 0));
    counts.rank_clocks_active += active;
    counts.rank_clocks_precharged += now - active;
  }
  return counts;
}

Clocks DramEstimate::last_data_end() const {
  Clocks end = 0;
  for (const Channel& channel : channels_) end = std::max(end, channel.data_bus.last_end());
  return end;
}

}  // namespace earshot
