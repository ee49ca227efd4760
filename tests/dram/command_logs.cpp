// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The judge of command logs is itself judged: hand-made logs that are as tight as the standards allow pass,
// and with one command moved by one clock exactly the one rule is named.
#include <catch2/catch.hpp>
#include <set>

#include "dram/command_checker.h"
#include "earshot/dram/grade_file.h"

namespace earshot {
namespace {

using C = DramCommand;

CommandRecord at(Clocks clock, C command, unsigned group = 0, unsigned bank = 0, unsigned rank = 0,
                 std::uint64_t row = 5) {
  CommandRecord record;
  record.clock = clock;
  record.command = command;
  record.rank = rank;
  record.bank_group = group;
  record.bank = bank;
  record.row = row;
  return record;
}

std::set<std::string> names(const std::vector<Broken>& broken) {
  std::set<std::string> all;
  for (const Broken& each : broken) all.insert(each.rule);
  return all;
}

struct Tight {
  std::string rule;
  std::vector<CommandRecord> log;
  std::size_t moved;  // the command that comes one clock
  int by = -1;        // sooner, or later
};

void check(const Grade& grade, const LogRules& rules, const std::vector<Tight>& cases) {
  for (const Tight& tight : cases) {
    std::string text = tight.rule + ":";
    for (const CommandRecord& command : tight.log) {
      text += std::string(" ") + name_of(command.command) + " " + std::to_string(command.clock);
    }
    INFO(text);
    CHECK(names(broken_rules(tight.log, grade, rules)).empty());
    std::vector<CommandRecord> moved = tight.log;
    moved[tight.moved].clock += static_cast<Clocks>(static_cast<std::int64_t>(tight.by));
    CHECK(names(broken_rules(moved, grade, rules)) == std::set<std::string>{tight.rule});
  }
}

// tRCD 17, tRP 17, tRAS 39, tRC 56, tRRD 4/6, tFAW 26, tCCD 4/6, tWR 18, tWTR 3/9, tRTP 9, CL 17, CWL 16,
// RD to WR 7, tRFC 420.
const Grade& ddr4() {
  static const Grade grade = load_grade("ddr4-2400t");
  return grade;
}

}  // namespace

TEST_CASE("One clock too soon after an activate or a precharge is found", "[dram]") {
  check(ddr4(), {},
        {
            {"tRCD", {at(0, C::activate), at(17, C::read)}, 1},
            {"tRCD", {at(0, C::activate), at(17, C::write_precharge)}, 1},
            {"tRAS", {at(0, C::activate), at(39, C::precharge)}, 1},
            {"tRAS", {at(0, C::activate), at(39, C::precharge_all)}, 1},
            {"tRP", {at(0, C::activate), at(50, C::precharge), at(67, C::activate)}, 2},
            {"tRP", {at(0, C::activate), at(50, C::precharge), at(67, C::refresh)}, 2},
            {"tRPab", {at(0, C::activate), at(50, C::precharge_all), at(67, C::activate, 1)}, 2},
            {"tRPab", {at(0, C::activate), at(50, C::precharge_all), at(67, C::refresh)}, 2},
            {"tRRD_S", {at(0, C::activate), at(4, C::activate, 1)}, 1},
            {"tRRD_L", {at(0, C::activate), at(6, C::activate, 0, 1)}, 1},
            {"tFAW",
             {at(0, C::activate), at(5, C::activate, 1), at(10, C::activate, 2), at(15, C::activate, 3),
              at(26, C::activate, 0, 1)},
             4},
        });
  Grade slow = ddr4();
  slow.trc = 60;
  check(slow, {},
        {{"tRC", {at(0, C::activate), at(39, C::precharge), at(60, C::activate)}, 2},
         {"tRC", {at(0, C::activate), at(39, C::precharge), at(60, C::refresh)}, 2}});
}

TEST_CASE("One clock too soon after a read or a write is found", "[dram]") {
  const CommandRecord a = at(0, C::activate), b = at(6, C::activate, 1), c = at(12, C::activate, 0, 1);
  check(ddr4(), {},
        {
            {"tCCD_L", {a, c, at(50, C::read), at(56, C::read, 0, 1)}, 3},
            {"tCCD_L", {a, at(50, C::read), at(56, C::read)}, 2},
            {"tCCD_L_WR", {a, c, at(50, C::write), at(56, C::write, 0, 1)}, 3},
            {"read to write", {a, at(50, C::read), at(57, C::write)}, 2},
            {"read to write", {a, b, at(50, C::read), at(57, C::write, 1)}, 3},
            {"tWTR_S", {a, b, at(50, C::write), at(73, C::read, 1)}, 3},
            {"tWTR_L", {a, c, at(50, C::write), at(79, C::read, 0, 1)}, 3},
            {"tRTP", {a, at(50, C::read), at(59, C::precharge)}, 2},
            {"tRTP", {a, at(50, C::read), at(59, C::precharge_all)}, 2},
            {"tWR", {a, at(50, C::write), at(88, C::precharge)}, 2},
            {"tWR", {a, at(50, C::write), at(88, C::precharge_all)}, 2},
        });
  Grade wide = ddr4();
  wide.tccd_s = 5;
  check(wide, {},
        {{"tCCD_S", {a, b, at(50, C::read), at(55, C::read, 1)}, 3},
         {"tCCD_S", {a, b, at(50, C::write), at(55, C::write, 1)}, 3}});
  const Grade ddr5 = load_grade("ddr5-4800b", 16, 4);
  check(ddr5, {}, {{"tCCD_L_WR", {a, c, at(60, C::write), at(108, C::write, 0, 1)}, 3}});
}

TEST_CASE("Data that collide on the bus are found, and ranks that follow too closely", "[dram]") {
  Grade careless = ddr4();
  careless.read_to_write = 3;
  check(careless, {}, {{"data bus", {at(0, C::activate), at(50, C::read), at(55, C::write)}, 2}});
  const CommandRecord a = at(0, C::activate), other = at(6, C::activate, 0, 0, 1);
  check(ddr4(), {2},
        {
            {"rank switch", {a, other, at(50, C::read), at(56, C::read, 0, 0, 1)}, 3},
            {"rank switch", {a, other, at(50, C::write), at(56, C::write, 0, 0, 1)}, 3},
            {"rank switch", {a, other, at(50, C::write), at(55, C::read, 0, 0, 1)}, 3},
            {"rank switch", {a, other, at(50, C::read), at(57, C::write, 0, 0, 1)}, 3},
            {"command bus", {a, at(1, C::activate, 0, 0, 1)}, 1},
        });
  CHECK(names(broken_rules({a, other, at(50, C::read), at(53, C::read, 0, 0, 1)}, ddr4(), {2})) ==
        std::set<std::string>{"data bus"});
}

TEST_CASE("A bank that closes itself does so no sooner than tRAS, tRTP and tWR allow", "[dram]") {
  const CommandRecord a = at(0, C::activate);
  check(ddr4(), {},
        {
            {"auto-precharge", {a, at(50, C::read_precharge), at(76, C::activate)}, 2},
            {"auto-precharge", {a, at(50, C::write_precharge), at(105, C::activate)}, 2},
            {"auto-precharge", {a, at(50, C::write_precharge), at(105, C::refresh)}, 2},
        });
  Grade quick = ddr4();
  quick.trc = 40;  // so that tRAS, not tRC, decides
  check(quick, {}, {{"auto-precharge", {a, at(17, C::read_precharge), at(56, C::activate)}, 2}});
  CHECK(names(broken_rules({a, at(17, C::read_precharge), at(30, C::read)}, ddr4())) ==
        std::set<std::string>{"open row"});
}

TEST_CASE("A column command needs its row open, an activate and a refresh a closed bank", "[dram]") {
  using Names = std::set<std::string>;
  const CommandRecord a = at(0, C::activate);
  CHECK(names(broken_rules({at(9, C::read)}, ddr4())) == Names{"open row"});
  CHECK(names(broken_rules({a, at(17, C::read, 0, 0, 0, 6)}, ddr4())) == Names{"open row"});
  CHECK(names(broken_rules({a, at(17, C::read, 0, 1)}, ddr4())) == Names{"open row"});
  CHECK(names(broken_rules({a, at(39, C::precharge), at(50, C::write)}, ddr4())) == Names{"open row"});
  CHECK(names(broken_rules({a, at(39, C::precharge_all), at(50, C::write)}, ddr4())) == Names{"open row"});
  CHECK(names(broken_rules({a, at(80, C::activate)}, ddr4())) == Names{"closed bank"});
  CHECK(names(broken_rules({a, at(80, C::refresh)}, ddr4())) == Names{"closed bank"});
  CHECK(names(broken_rules({a, at(80, C::refresh, 0, 0, 1)}, ddr4(), {2})).empty());
  CHECK(names(broken_rules({at(0, C::activate, 4)}, ddr4())) == Names{"address"});
  CHECK(names(broken_rules({at(0, C::activate, 0, 4)}, ddr4())) == Names{"address"});
  CHECK(names(broken_rules({at(0, C::activate, 0, 0, 1)}, ddr4())) == Names{"address"});
  CHECK(names(broken_rules({at(0, C::activate, 0, 0, 0, 65536)}, ddr4())) == Names{"address"});
  // Precharging a closed bank is allowed.
  CHECK(names(broken_rules({at(0, C::precharge), at(20, C::precharge_all)}, ddr4())).empty());
}

TEST_CASE("Nothing happens in a rank while it refreshes", "[dram]") {
  for (const C next : {C::activate, C::refresh, C::precharge, C::precharge_all}) {
    check(ddr4(), {}, {{"tRFC", {at(10, C::refresh), at(430, next)}, 1}});
  }
  check(ddr4(), {2}, {{"tRFC", {at(10, C::refresh), at(11, C::refresh, 0, 0, 1), at(430, C::activate)}, 2}});
}

TEST_CASE("A bank's own refresh keeps that bank, and other refreshes, waiting", "[dram]") {
  // tRFCpb 224, tRRD 16, tRP 29; 34 after a precharge of all banks
  const Grade lpddr4 = load_grade("lpddr4-3200");
  const LogRules rules = {1, DramRefresh::per_bank};
  const CommandRecord first = at(10, C::refresh_bank);
  check(lpddr4, rules,
        {
            {"tRFCpb", {first, at(234, C::activate)}, 1},
            {"tRFCpb", {first, at(234, C::refresh_bank, 0, 1)}, 1},
            {"tRRD_L", {first, at(26, C::activate, 0, 1)}, 1},
            {"tRRD_L", {at(0, C::activate), at(16, C::refresh_bank, 0, 1)}, 1},
            {"tRP", {at(0, C::activate), at(80, C::precharge), at(109, C::refresh_bank)}, 2},
            {"tRPab", {at(0, C::activate), at(80, C::precharge_all), at(114, C::refresh_bank)}, 2},
        });
  CHECK(names(broken_rules({at(0, C::activate), at(120, C::refresh_bank)}, lpddr4, rules)) ==
        std::set<std::string>{"closed bank"});
}

TEST_CASE("Refreshes are at most 8 late, at most 8 early, and at most 9 tREFI apart", "[dram]") {
  const Clocks interval = ddr4().trefi;
  std::vector<CommandRecord> early;
  for (Clocks i = 0; i < 8; ++i) early.push_back(at(10 + i * 500, C::refresh));
  early.push_back(at(interval, C::refresh));
  check(ddr4(), {},
        {
            {"9 tREFI", {at(100, C::refresh), at(100 + 9 * interval, C::refresh)}, 1, +1},
            {"postponed", {at(5 * interval, C::refresh), at(10 * interval, C::refresh)}, 1, +1},
            {"pulled in", early, 8},
        });
  CHECK(names(broken_rules({}, ddr4(), {1, DramRefresh::all_bank, 8 * interval})).empty());
  CHECK(names(broken_rules({}, ddr4(), {1, DramRefresh::all_bank, 9 * interval + 1})) ==
        std::set<std::string>{"9 tREFI", "postponed"});
  const std::vector<CommandRecord> once = {at(10, C::refresh)};
  CHECK(names(broken_rules(once, ddr4(), {1, DramRefresh::all_bank, 10 + 9 * interval})).empty());
  CHECK(names(broken_rules(once, ddr4(), {1, DramRefresh::all_bank, 11 + 9 * interval})) ==
        std::set<std::string>{"9 tREFI"});
  CHECK(names(broken_rules(once, ddr4(), {1, DramRefresh::off, 100 * interval})).empty());
  // every rank by itself
  CHECK(names(broken_rules(once, ddr4(), {2, DramRefresh::all_bank, 5 + 9 * interval})) ==
        std::set<std::string>{"9 tREFI", "postponed"});
}

TEST_CASE("Every bank is refreshed by itself where refreshes are of one bank", "[dram]") {
  const Grade lpddr4 = load_grade("lpddr4-3200");
  std::vector<CommandRecord> log;
  for (Clocks i = 1; i <= 100; ++i)
    log.push_back(at(i * 780, C::refresh_bank, 0, static_cast<unsigned>(i % 8)));
  const LogRules rules = {1, DramRefresh::per_bank};
  CHECK(names(broken_rules(log, lpddr4, rules)).empty());
  for (CommandRecord& refresh : log) refresh.bank %= 7;  // bank 7's go to bank 0
  CHECK(names(broken_rules(log, lpddr4, rules)) == std::set<std::string>{"9 tREFI"});
}

}  // namespace earshot
