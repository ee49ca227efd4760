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
      shared_from_(std::size_t{ranks} * grade.bank_groups * dram_steps),
      ranks_(ranks) {
  for (unsigned b = 0; b < banks_.size(); ++b) {
    banks_[b].rank = b / grade.banks();
    banks_[b].group = b / grade.banks_per_group;
  }
  occupy_bus(0, 0);
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
    if (banks_[b].row != no_row) not_before(from, precharge_from(b));
  return from;
}

Clocks DramBanks::refresh_from(unsigned rank) const {
  Clocks from = 0;
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b)
    not_before(from, banks_[b].from[static_cast<std::size_t>(DramStep::activate)]);
  return from;
}

// A per-bank refresh counts as an activation for tRRD and tFAW (JESD209-4; value from memory).
void DramBanks::count_activate(const Bank& bank, Clocks now) {
  Rank& r = ranks_[bank.rank];
  r.four_activates[r.oldest] = now + grade_.tfaw;
  r.oldest = (r.oldest + 1) % 4;
  group_not_before(bank.group, DramStep::activate, now + grade_.trrd_l);
  rank_not_before(bank.rank, DramStep::activate,
                  std::max<Clocks>(now + grade_.trrd_s, r.four_activates[r.oldest]));
}

void DramBanks::activate(unsigned bank, std::uint64_t row, Clocks now) {
  Bank& b = banks_[bank];
  b.row = row;
  b.last_use = now;
  b.from.not_before(DramStep::activate, now + grade_.trc);
  b.from.not_before(DramStep::precharge, now + grade_.tras);
  b.from.not_before(DramStep::read, now + grade_.trcd);
  b.from.not_before(DramStep::write, now + grade_.trcd);
  count_activate(b, now);
  Rank& r = ranks_[b.rank];
  if (r.open++ == 0) r.active_since = std::max(now, r.active_until);
}

void DramBanks::close(Bank& bank, Clocks at, Clocks trp) {
  bank.row = no_row;
  bank.from.not_before(DramStep::activate, at + trp);
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
      banks_[b].from.not_before(DramStep::activate, now + grade_.trp_all);
  }
}

Clocks DramBanks::column(unsigned bank, bool write, bool then_precharge, Clocks now) {
  Bank& b = banks_[bank];
  b.last_use = now;
  if (write) {
    b.from.not_before(DramStep::precharge, now + grade_.write_to_precharge());
    group_not_before(b.group, DramStep::write,
                     now + (grade_.tccd_l_wr != 0 ? grade_.tccd_l_wr : grade_.tccd_l));
    rank_not_before(b.rank, DramStep::write, now + grade_.tccd_s);
    group_not_before(b.group, DramStep::read, now + grade_.write_to_read_l());
    rank_not_before(b.rank, DramStep::read, now + grade_.write_to_read_s());
  } else {
    b.from.not_before(DramStep::precharge, now + grade_.trtp);
    group_not_before(b.group, DramStep::read, now + grade_.tccd_l);
    rank_not_before(b.rank, DramStep::read, now + grade_.tccd_s);
    rank_not_before(b.rank, DramStep::write, now + grade_.read_to_write);
  }
  const Clocks end = now + (write ? grade_.cwl : grade_.cl) + grade_.burst_clocks();
  occupy_bus(b.rank, end);
  if (then_precharge) close(b, precharge_from(bank), grade_.trp);
  return end;
}

// The data of later bursts come after `end`. What earlier ones demanded can stay: it is no later.
void DramBanks::occupy_bus(unsigned rank, Clocks end) {
  for (unsigned r = 0; r < ranks_.size(); ++r) {
    const Clocks bus = end + (r == rank ? 0 : grade_.rank_switch);
    rank_not_before(r, DramStep::read, bus - std::min<Clocks>(bus, grade_.cl));
    rank_not_before(r, DramStep::write, bus - std::min<Clocks>(bus, grade_.cwl));
  }
}

void DramBanks::group_not_before(unsigned group, DramStep step, Clocks clock) {
  not_before(shared_from_[group * dram_steps + static_cast<std::size_t>(step)], clock);
}

void DramBanks::rank_not_before(unsigned rank, DramStep step, Clocks clock) {
  for (unsigned g = rank * grade_.bank_groups; g < (rank + 1) * grade_.bank_groups; ++g)
    group_not_before(g, step, clock);
}

void DramBanks::refresh(unsigned rank, Clocks now) {
  for (unsigned b = rank * grade_.banks(); b < (rank + 1) * grade_.banks(); ++b)
    banks_[b].from.not_before(DramStep::activate, now + grade_.trfc);
}

void DramBanks::refresh_bank(unsigned bank, Clocks now) {
  Bank& b = banks_[bank];
  count_activate(b, now);
  b.from.not_before(DramStep::activate, now + grade_.trfc_bank);
  ranks_[b.rank].refresh_bank_from = now + grade_.trfc_bank;
}

}  // namespace earshot
