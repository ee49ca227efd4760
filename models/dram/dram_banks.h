// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// DramBanks is the state of all banks of one channel and the earliest clock at which each command may be
// given to them: every constraint between commands of a bank, a bank group, a rank and the data bus
// (JESD79-3, -4, -5, JESD209-4). It does not choose; that is DramChannel's work. Banks are numbered rank by
// rank, group by group. Clocks given to commands never decrease. Kernel-free.
#pragma once

#include <algorithm>
#include <array>
#include <vector>

#include "earshot/dram/grade.h"

namespace earshot {

class DramBanks {
 public:
  static constexpr std::uint64_t no_row = ~std::uint64_t{0};

  DramBanks(const Grade& grade, unsigned ranks);

  unsigned banks_of_rank() const { return grade_.banks(); }
  unsigned count() const { return static_cast<unsigned>(banks_.size()); }
  unsigned number(unsigned rank, unsigned group, unsigned bank) const {
    return (rank * grade_.bank_groups + group) * grade_.banks_per_group + bank;
  }
  unsigned rank_of(unsigned bank) const { return banks_[bank].rank; }
  unsigned group_of(unsigned bank) const { return banks_[bank].group % grade_.bank_groups; }
  unsigned place_in_group(unsigned bank) const { return bank % grade_.banks_per_group; }

  std::uint64_t row(unsigned bank) const { return banks_[bank].row; }  // open, or no_row
  Clocks last_use(unsigned bank) const { return banks_[bank].last_use; }
  unsigned open_banks(unsigned rank) const { return ranks_[rank].open; }
  Clocks active(unsigned rank, Clocks now) const;  // clocks before `now` during which a row was open

  // The earliest clock that violates nothing. REQUIRES: the bank is open, respectively precharged, as the
  // command wants it.
  Clocks activate_from(unsigned bank) const {
    const Bank& b = banks_[bank];
    const Rank& r = ranks_[b.rank];
    return std::max(std::max(b.activate_from, groups_[b.group].activate_from),
                    std::max(r.activate_from, r.four_activates[r.oldest]));
  }
  Clocks precharge_from(unsigned bank) const { return banks_[bank].precharge_from; }
  Clocks column_from(unsigned bank, bool write) const {
    const Bank& b = banks_[bank];
    const Group& g = groups_[b.group];
    const Rank& r = ranks_[b.rank];
    const Clocks bus = data_end_ + (b.rank == data_rank_ ? 0 : grade_.rank_switch);
    const Clocks latency = write ? grade_.cwl : grade_.cl;
    const Clocks same_rank =
        write ? std::max(g.write_from, r.write_from) : std::max(g.read_from, r.read_from);
    return std::max(std::max(b.column_from, same_rank), bus > latency ? bus - latency : 0);
  }
  Clocks precharge_all_from(unsigned rank) const;
  Clocks refresh_from(unsigned rank) const;
  Clocks refresh_bank_from(unsigned bank) const {
    return std::max(activate_from(bank), ranks_[banks_[bank].rank].refresh_bank_from);
  }

  // The commands. REQUIRES: `now` is not before the above.
  void activate(unsigned bank, std::uint64_t row, Clocks now);
  void precharge(unsigned bank, Clocks now);
  void precharge_all(unsigned rank, Clocks now);
  Clocks column(unsigned bank, bool write, bool then_precharge, Clocks now);  // the end of its data
  void refresh(unsigned rank, Clocks now);
  void refresh_bank(unsigned bank, Clocks now);

 private:
  struct Bank {
    std::uint64_t row = no_row;
    Clocks activate_from = 0, precharge_from = 0, column_from = 0;
    Clocks last_use = 0;
    unsigned rank = 0;
    unsigned group = 0;  // of all ranks
  };
  struct Group {
    Clocks activate_from = 0, read_from = 0, write_from = 0;
  };
  struct Rank {
    Clocks activate_from = 0, read_from = 0, write_from = 0, refresh_bank_from = 0;
    std::array<Clocks, 4> four_activates{};  // tFAW after the last four
    unsigned oldest = 0;
    unsigned open = 0;  // banks
    Clocks active = 0;  // before the row open now, or until `active_until`
    Clocks active_since = 0, active_until = 0;
  };
  void count_activate(const Bank& bank, Clocks now);
  void close(Bank& bank, Clocks at, Clocks trp);

  Grade grade_;
  std::vector<Bank> banks_;
  std::vector<Group> groups_;
  std::vector<Rank> ranks_;
  Clocks data_end_ = 0;
  unsigned data_rank_ = 0;
};

}  // namespace earshot
