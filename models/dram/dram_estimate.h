// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A DramEstimate tells at once how long a burst will take, for platforms whose initiators run ahead of each
// other (temporal decoupling). An idle device is timed as DramChannel times it: row hit, precharged bank, row
// conflict, a refresh under way. Contention is estimated: requests book the earliest gap in the timetables of
// their bank's row cycles, their rank's activations and their channel's data bus; there is no reordering and
// no write queue, so a write occupies the devices when it comes. The open row is that of the latest call.
//
// Requests may come with times out of order. What the device still waits for since a request whose time is
// far ahead (more than eight row cycles) is no concern of one that comes before it. Kernel-free; times are
// clocks.
#pragma once

#include <vector>

#include "earshot/dram/dram_address_map.h"
#include "earshot/dram/dram_config.h"
#include "earshot/dram/dram_counts.h"
#include "earshot/timing/calendar.h"

namespace earshot {

class DramEstimate {
 public:
  struct Times {
    Clocks started = 0;  // its first command
    Clocks done = 0;     // the end of its data
  };

  // REQUIRES: config.problems() is empty.
  explicit DramEstimate(const DramConfig& config);

  // REQUIRES: ready >= the last time given to forget_before().
  Times access(const DramPlace& place, bool write, Clocks ready);
  void forget_before(Clocks now) { now_ = now; }

  // Refreshes are those due until `now`; a row counts as open until its rank is refreshed (if rows are never
  // left open: for tRAS).
  DramCounts counts(Clocks now) const;
  Clocks data_bus_busy(unsigned channel) const { return channels_[channel].data_bus.busy_time(); }
  Clocks last_data_end() const;

 private:
  struct Bank {
    std::uint64_t row = 0;
    bool open = false;
    Clocks refreshes = 0;  // that had been due when it was used last
    Clocks last_use = 0, column_from = 0, precharge_from = 0;
    Calendar row_cycles;
  };
  struct Rank {
    Calendar activations;
    Clocks read_from = 0;   // after a write
    Clocks write_from = 0;  // after a read
    Clocks active = 0, active_since = 0, active_until = 0;
  };
  struct Channel {
    Calendar data_bus;
  };
  // The refreshes that a bank has to stand still for: at first, first + interval, ... for `length` clocks.
  // One that falls due at the clock of a request comes after it.
  struct Refreshes {
    Clocks first = 0, interval = 0, length = 0;  // interval 0: none
    Clocks due_before(Clocks now) const {
      return interval == 0 || now <= first ? 0 : (now - first - 1) / interval + 1;
    }
    Clocks due(Clocks number) const { return first + (number - 1) * interval; }
  };
  Refreshes refreshes_of(unsigned rank, unsigned bank) const;
  Clocks after_refresh(const Bank& bank, const Rank& rank, const Refreshes& refreshes, Clocks ready) const;
  bool still_open(const Bank& bank, const Refreshes& refreshes, Clocks ready) const;
  Clocks wait_for(Clocks from, Clocks ready) const;
  Clocks open_row(Bank& bank, Rank& rank, const Refreshes& refreshes, bool conflict, Clocks ready,
                  Clocks& started);
  void count_active(Rank& rank, const Refreshes& refreshes, Clocks activate);

  DramConfig config_;
  Clocks far_ahead_;
  Clocks now_ = 0;
  std::vector<Channel> channels_;
  std::vector<Rank> ranks_;  // of all channels
  std::vector<Clocks> group_read_from_,
      group_write_from_;     // of all ranks: tCCD_L after the last column command
  std::vector<Bank> banks_;  // of all groups
  DramCounts counts_;
};

}  // namespace earshot
