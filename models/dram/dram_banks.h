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

// What a bank does next for a burst.
enum class DramStep : std::uint8_t { precharge, activate, read, write };
constexpr std::size_t dram_steps = 4;

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
  Clocks from(unsigned bank, DramStep step) const {
    return std::max(own_from(bank, step), shared_from(shared(bank, step)));
  }
  // The same in two parts, for who compares many banks: as far as the bank itself is concerned, which changes
  // with commands to this bank or refreshes of its rank only; and for its group, its rank and the data bus.
  Clocks own_from(unsigned bank, DramStep step) const {
    return banks_[bank].from[static_cast<std::size_t>(step)];
  }
  unsigned shared(unsigned bank, DramStep step) const {
    return static_cast<unsigned>(banks_[bank].group * dram_steps + static_cast<std::size_t>(step));
  }
  Clocks shared_from(unsigned shared) const { return shared_from_[shared]; }
  Clocks precharge_from(unsigned bank) const { return from(bank, DramStep::precharge); }
  Clocks precharge_all_from(unsigned rank) const;
  Clocks refresh_from(unsigned rank) const;
  Clocks refresh_bank_from(unsigned bank) const {
    return std::max(from(bank, DramStep::activate), ranks_[banks_[bank].rank].refresh_bank_from);
  }

  // The commands. REQUIRES: `now` is not before the above.
  void activate(unsigned bank, std::uint64_t row, Clocks now);
  void precharge(unsigned bank, Clocks now);
  void precharge_all(unsigned rank, Clocks now);
  Clocks column(unsigned bank, bool write, bool then_precharge, Clocks now);  // the end of its data
  void refresh(unsigned rank, Clocks now);
  void refresh_bank(unsigned bank, Clocks now);

 private:
  // From when on each step is possible, as far as one bank is concerned.
  struct Steps : std::array<Clocks, dram_steps> {
    void not_before(DramStep step, Clocks clock) {
      Clocks& own = (*this)[static_cast<std::size_t>(step)];
      own = std::max(own, clock);
    }
  };
  struct Bank {
    std::uint64_t row = no_row;
    Steps from{};
    Clocks last_use = 0;
    unsigned rank = 0;
    unsigned group = 0;  // of all ranks
  };
  struct Rank {
    Clocks refresh_bank_from = 0;
    std::array<Clocks, 4> four_activates{};  // tFAW after the last four
    unsigned oldest = 0;
    unsigned open = 0;  // banks
    Clocks active = 0;  // before the row open now, or until `active_until`
    Clocks active_since = 0, active_until = 0;
  };
  void count_activate(const Bank& bank, Clocks now);
  void close(Bank& bank, Clocks at, Clocks trp);
  void occupy_bus(unsigned rank, Clocks end);
  void group_not_before(unsigned group, DramStep step, Clocks clock);
  void rank_not_before(unsigned rank, DramStep step, Clocks clock);

  Grade grade_;
  std::vector<Bank> banks_;
  std::vector<Clocks> shared_from_;  // by group of all ranks, and step
  std::vector<Rank> ranks_;
};

}  // namespace earshot
