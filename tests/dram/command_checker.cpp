// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "dram/command_checker.h"

#include <algorithm>
#include <map>
#include <set>

namespace earshot {
namespace {

using Command = DramCommand;

// What the two commands of a rule have in common.
enum class Scope { bank, other_bank_of_group, group, other_group, rank };

// A set of kinds of commands.
class Kinds {
 public:
  Kinds(std::initializer_list<Command> kinds) {
    for (const Command kind : kinds) bits_ |= 1u << static_cast<unsigned>(kind);
  }
  bool have(Command kind) const { return (bits_ >> static_cast<unsigned>(kind) & 1) != 0; }

 private:
  unsigned bits_ = 0;
};

struct PairRule {
  const char* name;
  Kinds earlier, later;
  Scope scope;
  Clocks least;
};

const Kinds reads = {Command::read, Command::read_precharge};
const Kinds writes = {Command::write, Command::write_precharge};
const Kinds columns = {Command::read, Command::read_precharge, Command::write, Command::write_precharge};
const Kinds openings = {Command::activate, Command::refresh_bank};
const Kinds refreshes = {Command::refresh, Command::refresh_bank};
const Kinds anything = {
    Command::activate,        Command::read,      Command::read_precharge, Command::write,
    Command::write_precharge, Command::precharge, Command::precharge_all,  Command::refresh,
    Command::refresh_bank};

// JESD79-3, JESD79-4 and JESD209-4: timing parameters and command spacing; of refreshes of one bank,
// JESD209-4's table of separations (from memory). Auto-precharge is dealt with in precharge_start().
std::vector<PairRule> pair_rules(const Grade& g) {
  const Clocks burst = g.burst_length / 2;
  const Clocks write_data_end = g.cwl + burst;
  const Command act = Command::activate, pre = Command::precharge, prea = Command::precharge_all;
  const Command ref = Command::refresh, refpb = Command::refresh_bank;
  return {
      {"tRCD", {act}, columns, Scope::bank, g.trcd},
      {"tRAS", {act}, {pre}, Scope::bank, g.tras},
      {"tRAS", {act}, {prea}, Scope::rank, g.tras},
      {"tRC", {act}, {act, refpb}, Scope::bank, g.trc},
      {"tRC", {act}, {ref}, Scope::rank, g.trc},
      {"tRP", {pre}, {act, refpb}, Scope::bank, g.trp},
      {"tRP", {pre}, {ref}, Scope::rank, g.trp},
      {"tRPab", {prea}, {act, ref, refpb}, Scope::rank, g.trp_all},
      {"tRRD_S", {act, refpb}, {act, refpb}, Scope::other_group, g.trrd_s},
      {"tRRD_L", {act, refpb}, {act, refpb}, Scope::other_bank_of_group, g.trrd_l},
      {"tCCD_S", reads, reads, Scope::other_group, g.tccd_s},
      {"tCCD_S", writes, writes, Scope::other_group, g.tccd_s},
      {"tCCD_L", reads, reads, Scope::group, g.tccd_l},
      {"tCCD_L_WR", writes, writes, Scope::group, g.tccd_l_wr},
      {"read to write", reads, writes, Scope::rank, g.read_to_write},
      {"tWTR_S", writes, reads, Scope::other_group, write_data_end + g.twtr_s + g.write_to_read_extra},
      {"tWTR_L", writes, reads, Scope::group, write_data_end + g.twtr_l + g.write_to_read_extra},
      {"tRTP", reads, {pre}, Scope::bank, g.trtp},
      {"tRTP", reads, {prea}, Scope::rank, g.trtp},
      {"tWR", writes, {pre}, Scope::bank, write_data_end + g.twr},
      {"tWR", writes, {prea}, Scope::rank, write_data_end + g.twr},
      {"tRFC", {ref}, anything, Scope::rank, g.trfc},
      {"tRFCpb", {refpb}, anything, Scope::bank, g.trfc_bank},
      {"tRFCpb", {refpb}, {ref, refpb}, Scope::rank, g.trfc_bank},
  };
}

bool same_rank(const CommandRecord& a, const CommandRecord& b) {
  return a.rank == b.rank;
}
bool same_group(const CommandRecord& a, const CommandRecord& b) {
  return same_rank(a, b) && a.bank_group == b.bank_group;
}
bool same_bank(const CommandRecord& a, const CommandRecord& b) {
  return same_group(a, b) && a.bank == b.bank;
}

bool in_scope(Scope scope, const CommandRecord& a, const CommandRecord& b) {
  switch (scope) {
    case Scope::bank:
      return same_bank(a, b);
    case Scope::other_bank_of_group:
      return same_group(a, b) && !same_bank(a, b);
    case Scope::group:
      return same_group(a, b);
    case Scope::other_group:
      return same_rank(a, b) && !same_group(a, b);
    case Scope::rank:
      return same_rank(a, b);
  }
  return false;
}

std::string describe(const CommandRecord& c) {
  return std::string(name_of(c.command)) + " at " + std::to_string(c.clock) + " (channel " +
         std::to_string(c.channel) + " rank " + std::to_string(c.rank) + " group " +
         std::to_string(c.bank_group) + " bank " + std::to_string(c.bank) + " row " + std::to_string(c.row) +
         ")";
}

struct BankState {
  bool open = false;
  CommandRecord activate;  // the latest, if any
  bool was_activated = false;
  Clocks self_closed = 0;  // when the latest auto-precharge begins
  bool closed_itself = false;
};

class ChannelJudge {
 public:
  ChannelJudge(const Grade& grade, const LogRules& rules)
      : grade_(grade), rules_(rules), pair_rules_(pair_rules(grade)), banks_(rules.ranks * grade.banks()) {
    for (const PairRule& rule : pair_rules_) {
      const bool after_refresh =
          rule.earlier.have(Command::refresh) || rule.earlier.have(Command::refresh_bank);
      if (!after_refresh) window_ = std::max(window_, rule.least);
    }
    window_ = std::max(
        {window_, Clocks{grade.tfaw}, Clocks{grade.cl} + grade.cwl + grade.burst_length + grade.rank_switch});
  }

  void judge(const CommandRecord& now) {
    if (!check_address(now)) return;
    check_command_bus(now);
    check_pairs(now);
    check_four_activates(now);
    check_data_bus(now);
    check_bank_state(now);
    check_auto_precharge(now);
    remember(now);
  }

  void finish(Clocks end) {
    if (rules_.refresh == DramRefresh::off) return;
    for (unsigned rank = 0; rank < rules_.ranks; ++rank) check_refreshes(rank, end);
  }

  std::vector<Broken> take() { return std::move(broken_); }

 private:
  void add(const char* rule, const std::string& text) {
    broken_.push_back({rule, std::string(rule) + ": " + text});
  }

  BankState& bank(const CommandRecord& c) {
    return banks_[(c.rank * grade_.bank_groups + c.bank_group) * grade_.banks_per_group + c.bank];
  }

  bool check_address(const CommandRecord& c) {
    const std::uint64_t bursts =
        std::uint64_t{grade_.page_bytes} * 8 / (grade_.device_bits * grade_.burst_length);
    const bool fits = c.rank < rules_.ranks && c.bank_group < grade_.bank_groups &&
                      c.bank < grade_.banks_per_group && c.row < grade_.rows && c.column < bursts;
    if (!fits) add("address", describe(c) + " is outside the device");
    return fits;
  }

  void check_command_bus(const CommandRecord& now) {
    if (!past_.empty() && past_.back().clock >= now.clock) {
      add("command bus", describe(now) + " is not after " + describe(past_.back()));
    }
  }

  void check_pairs(const CommandRecord& now) {
    for (const CommandRecord& before : past_) {
      if (!refreshes.have(before.command)) check_pair(before, now);
    }
    for (const CommandRecord& before : refreshes_) check_pair(before, now);
  }

  void check_pair(const CommandRecord& before, const CommandRecord& now) {
    for (const PairRule& rule : pair_rules_) {
      if (now.clock - before.clock >= rule.least) continue;
      if (!rule.earlier.have(before.command) || !rule.later.have(now.command)) continue;
      if (!in_scope(rule.scope, before, now)) continue;
      add(rule.name, describe(now) + " after " + describe(before) + ", needs " + std::to_string(rule.least));
    }
  }

  // Of any five activates of a rank the last is at least tFAW after the first. Refreshes of one bank count.
  void check_four_activates(const CommandRecord& now) {
    if (!openings.have(now.command)) return;
    unsigned recent = 1;
    for (const CommandRecord& before : past_) {
      recent +=
          openings.have(before.command) && same_rank(before, now) && now.clock - before.clock < grade_.tfaw;
    }
    if (recent > 4)
      add("tFAW", describe(now) + " is the fifth activate in less than " + std::to_string(grade_.tfaw));
  }

  Clocks data_begin(const CommandRecord& c) const {
    return c.clock + (reads.have(c.command) ? grade_.cl : grade_.cwl);
  }

  void check_data_bus(const CommandRecord& now) {
    if (!columns.have(now.command)) return;
    const Clocks burst = grade_.burst_length / 2;
    for (const CommandRecord& before : past_) {
      if (!columns.have(before.command)) continue;
      const Clocks first = std::min(data_begin(before), data_begin(now));
      const Clocks second = std::max(data_begin(before), data_begin(now));
      if (second < first + burst) {
        add("data bus", describe(now) + " moves data together with " + describe(before));
      } else if (!same_rank(before, now) && second < first + burst + grade_.rank_switch) {
        add("rank switch", describe(now) + " and " + describe(before) + " are of different ranks");
      }
    }
  }

  void check_bank_state(const CommandRecord& now) {
    if (columns.have(now.command)) {
      if (!bank(now).open)
        add("open row", describe(now) + ": the bank is closed");
      else if (bank(now).activate.row != now.row)
        add("open row", describe(now) + ": another row is open");
    }
    if (now.command == Command::activate && bank(now).open)
      add("closed bank", describe(now) + ": the bank is open");
    if (now.command == Command::refresh_bank && bank(now).open)
      add("closed bank", describe(now) + ": the bank is open");
    if (now.command != Command::refresh) return;
    for (const BankState& state : banks_) {
      if (state.open && same_rank(state.activate, now)) {
        add("closed bank", describe(now) + ": a row is open since " + describe(state.activate));
      }
    }
  }

  // A bank that closes itself does so as if a precharge had come as early as tRAS and tRTP, or tWR, allow.
  Clocks precharge_start(const CommandRecord& now) {
    const Clocks after_row = bank(now).activate.clock + grade_.tras;
    const Clocks after_data = now.command == Command::read_precharge
                                  ? now.clock + grade_.trtp
                                  : now.clock + grade_.cwl + grade_.burst_length / 2 + grade_.twr;
    return std::max(after_row, after_data);
  }

  void check_auto_precharge(const CommandRecord& now) {
    const bool rank_wide = now.command == Command::refresh;
    if (!rank_wide && now.command != Command::activate && now.command != Command::refresh_bank) return;
    for (const BankState& state : banks_) {
      if (!state.closed_itself ||
          !(rank_wide ? same_rank(state.activate, now) : same_bank(state.activate, now)))
        continue;
      if (now.clock < state.self_closed + grade_.trp) {
        add("auto-precharge",
            describe(now) + ": the bank precharges itself from " + std::to_string(state.self_closed) + " on");
      }
    }
  }

  void remember(const CommandRecord& now) {
    BankState& state = bank(now);
    switch (now.command) {
      case Command::activate:
        state = {true, now, true, 0, false};
        break;
      case Command::read_precharge:
      case Command::write_precharge:
        state.self_closed = precharge_start(now);
        state.closed_itself = true;
        state.open = false;
        break;
      case Command::precharge:
        state.open = false;
        break;
      case Command::precharge_all:
        for (BankState& each : banks_) {
          if (each.was_activated && same_rank(each.activate, now)) each.open = false;
        }
        break;
      default:
        break;
    }
    if (refreshes.have(now.command)) {
      refreshes_.push_back(now);
      all_refreshes_.push_back(now);
    }
    past_.push_back(now);
    const auto old = [&](Clocks window) {
      return [&now, window](const CommandRecord& c) { return c.clock + window < now.clock; };
    };
    past_.erase(past_.begin(), std::find_if_not(past_.begin(), past_.end(), old(window_)));
    const Clocks longest = std::max(grade_.trfc, grade_.trfc_bank);
    refreshes_.erase(refreshes_.begin(),
                     std::find_if_not(refreshes_.begin(), refreshes_.end(), old(longest)));
  }

  // JESD79-3F and -4B: a refresh may be postponed while no more than 8 are, and no two are more than 9 tREFI
  // apart; 8 may be pulled in. Of one bank (JESD209-4): the same in rounds of all banks.
  void check_refreshes(unsigned rank, Clocks end) {
    const bool by_bank = rules_.refresh == DramRefresh::per_bank;
    const Clocks interval = by_bank ? grade_.trefi_bank : grade_.trefi;
    const Clocks allowed = Clocks{8} * (by_bank ? grade_.banks() : 1);
    std::map<unsigned, Clocks> latest;  // of each bank
    if (by_bank) {
      for (unsigned i = 0; i < grade_.banks(); ++i) latest[i] = 0;
    } else {
      latest[0] = 0;
    }
    const auto check_gap = [&](unsigned which, Clocks now) {
      if (now - latest[which] > Clocks{9} * grade_.trefi) {
        add("9 tREFI", "rank " + std::to_string(rank) + " bank " + std::to_string(which) +
                           " is not refreshed from " + std::to_string(latest[which]) + " to " +
                           std::to_string(now));
      }
    };
    Clocks done = 0;
    const auto check_owed = [&](Clocks now) {
      const Clocks due = now == 0 ? 0 : (now - 1) / interval;  // before now
      if (due > done + allowed) {
        add("postponed", std::to_string(due - done) + " refreshes of rank " + std::to_string(rank) +
                             " are owed at " + std::to_string(now));
      }
    };
    for (const CommandRecord& refresh : all_refreshes_) {
      if (refresh.rank != rank) continue;
      if ((refresh.command == Command::refresh_bank) != by_bank) continue;
      const unsigned which = by_bank ? refresh.bank_group * grade_.banks_per_group + refresh.bank : 0;
      check_gap(which, refresh.clock);
      check_owed(refresh.clock);
      latest[which] = refresh.clock;
      ++done;
      const Clocks due_by_now = refresh.clock / interval;
      if (done > due_by_now + allowed) {
        add("pulled in", std::to_string(done - due_by_now) + " refreshes of rank " + std::to_string(rank) +
                             " are ahead at " + std::to_string(refresh.clock));
      }
    }
    for (const auto& [which, ignored] : latest) check_gap(which, end);
    check_owed(end);
  }

  const Grade& grade_;
  const LogRules rules_;
  const std::vector<PairRule> pair_rules_;
  std::vector<BankState> banks_;
  Clocks window_ = 0;
  std::vector<CommandRecord> past_;       // within the window
  std::vector<CommandRecord> refreshes_;  // whose tRFC may not be over
  std::vector<CommandRecord> all_refreshes_;
  std::vector<Broken> broken_;
};

}  // namespace

std::vector<Broken> broken_rules(const std::vector<CommandRecord>& log, const Grade& grade,
                                 const LogRules& rules) {
  std::map<unsigned, ChannelJudge> channels;
  if (log.empty()) channels.try_emplace(0, grade, rules);
  Clocks end = rules.end;
  for (const CommandRecord& command : log) {
    channels.try_emplace(command.channel, grade, rules).first->second.judge(command);
    if (rules.end == 0) end = std::max(end, command.clock);
  }
  std::vector<Broken> all;
  for (auto& [ignored, judge] : channels) {
    judge.finish(end);
    for (Broken& broken : judge.take()) all.push_back(std::move(broken));
  }
  return all;
}

}  // namespace earshot
