// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/dram_banks.h"

namespace earshot {

namespace {
void not_before(Clocks& from, Clocks clock) {
  from = std::max(from, clock);
}
}  // namespace

DramBanks::DramBanks(const Grade& grade, unsigned ranks)
    : grade_(grade),
      banks_(std::size_t{ranks} * grade.banks()),
      groups_(std::size_t{ranks} * grade.bank_groups),
      ranks_(ranks) {
  for (unsigned b = 0; b < banks_.size(); ++b) {
    banks_[b].rank = b / grade.banks();
    banks_[b].group = b / grade.banks_per_group;
  }
}

Clocks DramBanks::active(unsigned rank, Clocks now) const {
  const Rank& r = ranks_[rank];
  // Auto-precharge closes in the future: both times may lie after `now`.
  if (r.open > 0)
    return now >= r.active_since ? r.active + (now - r.active_since) : r.active - (r.active_since - now);
  return r.active - (r.active_until > now ? r.active_until - now : 0);
}

Clocks DramBanks::precharge_all_from(unsigned rank) const {
  Clocks from = 0;
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b)
    if (banks_[b].row != no_row) not_before(from, banks_[b].precharge_from);
  return from;
}

Clocks DramBanks::refresh_from(unsigned rank) const {
  Clocks from = 0;
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b)
    not_before(from, banks_[b].activate_from);
  return from;
}

// A per-bank refresh counts as an activation for tRRD and tFAW (JESD209-4; value from memory).
void DramBanks::count_activate(const Bank& bank, Clocks now) {
  Rank& r = ranks_[bank.rank];
  not_before(groups_[bank.group].activate_from, now + grade_.trrd_l);
  not_before(r.activate_from, now + grade_.trrd_s);
  r.four_activates[r.oldest] = now + grade_.tfaw;
  r.oldest = (r.oldest + 1) % 4;
}

void DramBanks::activate(unsigned bank, std::uint64_t row, Clocks now) {
  Bank& b = banks_[bank];
  b.row = row;
  b.last_use = now;
  not_before(b.activate_from, now + grade_.trc);
  not_before(b.precharge_from, now + grade_.tras);
  b.column_from = now + grade_.trcd;
  count_activate(b, now);
  Rank& r = ranks_[b.rank];
  if (r.open++ == 0) r.active_since = std::max(now, r.active_until);
}

void DramBanks::close(Bank& bank, Clocks at, Clocks trp) {
  bank.row = no_row;
  not_before(bank.activate_from, at + trp);
  Rank& r = ranks_[bank.rank];
  not_before(r.active_until, at);
  if (--r.open == 0 && r.active_until > r.active_since) r.active += r.active_until - r.active_since;
}

void DramBanks::precharge(unsigned bank, Clocks now) {
  close(banks_[bank], now, grade_.trp);
}

void DramBanks::precharge_all(unsigned rank, Clocks now) {
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b) {
    if (banks_[b].row != no_row)
      close(banks_[b], now, grade_.trp_all);
    else
      not_before(banks_[b].activate_from, now + grade_.trp_all);
  }
}

Clocks DramBanks::column(unsigned bank, bool write, bool then_precharge, Clocks now) {
  Bank& b = banks_[bank];
  Group& g = groups_[b.group];
  Rank& r = ranks_[b.rank];
  b.last_use = now;
  if (write) {
    not_before(b.precharge_from, now + grade_.write_to_precharge());
    not_before(g.write_from, now + (grade_.tccd_l_wr != 0 ? grade_.tccd_l_wr : grade_.tccd_l));
    not_before(r.write_from, now + grade_.tccd_s);
    not_before(g.read_from, now + grade_.write_to_read_l());
    not_before(r.read_from, now + grade_.write_to_read_s());
  } else {
    not_before(b.precharge_from, now + grade_.trtp);
    not_before(g.read_from, now + grade_.tccd_l);
    not_before(r.read_from, now + grade_.tccd_s);
    not_before(r.write_from, now + grade_.read_to_write);
  }
  data_end_ = now + (write ? grade_.cwl : grade_.cl) + grade_.burst_clocks();
  data_rank_ = b.rank;
  if (then_precharge) close(b, b.precharge_from, grade_.trp);
  return data_end_;
}

void DramBanks::refresh(unsigned rank, Clocks now) {
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b)
    banks_[b].activate_from = now + grade_.trfc;
}

void DramBanks::refresh_bank(unsigned bank, Clocks now) {
  Bank& b = banks_[bank];
  count_activate(b, now);
  b.activate_from = now + grade_.trfc_bank;
  ranks_[b.rank].refresh_bank_from = now + grade_.trfc_bank;
}

}  // namespace earshot
