// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// How far apart commands come, as vendors print it in figures, with grades that have those figures'
// latencies.
#include <catch2/catch.hpp>

#include "earshot/dram/grade_file.h"
#include "outside/dram_drive.h"

namespace earshot {
namespace {

// Two bank groups. What the figures leave open is small, so that it never decides.
Grade figure(const std::string& latencies) {
  return parse_grade(
      "grade figure\nstandard \"none\"\nclock 1200MHz\ndensity 4\nwidth 8\nbank-groups 2\n"
      "banks-per-group 4\npage 1024\nchannel 64\ntRCD 11nCK\ntRAS 20nCK\ntRRD 4nCK\ntFAW 16nCK\n"
      "tWR 10nCK\ntREFI 7.8us\ntRFC 260ns\n" +
          latencies + "tRC tRAS + tRP\n",
      "figure");
}

// From one column command to the next, both hits: in bank 0, or the second one in the other group.
Clocks column_to_column(const Grade& grade, bool first_write, bool second_write, bool other_group) {
  DramConfig config = quiet(grade);
  config.scheduling = DramScheduling::first_come;
  DrivenChannel driven(config);
  const unsigned second_bank = other_group ? 1 : 0;
  driven.put({false, place(grade, second_bank, 5)}, 0);
  driven.put({false, place(grade, 0, 5)}, 0);
  driven.put({first_write, place(grade, 0, 5, 1)}, 1000);
  driven.put({second_write, place(grade, second_bank, 5, 2)}, 1000);
  driven.finish();
  const std::vector<CommandRecord> log = driven.legal_log();
  REQUIRE(log.size() >= 4);
  CHECK(log[log.size() - 2].clock == 1000);
  return log.back().clock - log[log.size() - 2].clock;
}

Clocks read_to_write(const Grade& grade) {
  const Clocks same = column_to_column(grade, false, true, false);
  if (grade.bank_groups > 1) CHECK(column_to_column(grade, false, true, true) == same);
  return same;
}
Clocks write_to_read(const Grade& grade, bool other_group) {
  return column_to_column(grade, true, false, other_group);
}

const std::string rest = "tCCD 4nCK\ntRTP 6nCK\ntRP 11nCK\n";
const std::string one_clock_preamble = "read-to-write CL + BL/2 + 2nCK - CWL\n";

}  // namespace

TEST_CASE("A write follows a read as far as in Micron's DDR4 figures 142 to 145", "[outside][dram]") {
  const std::string wtr = "tWTR_S 2nCK\ntWTR_L 4nCK\n" + rest;
  CHECK(read_to_write(figure("burst 8\nCL 11nCK\nCWL 9nCK\n" + wtr + one_clock_preamble)) == 8);
  // BC4, in a model without burst chop: bursts of 4
  CHECK(read_to_write(figure("burst 4\nCL 11nCK\nCWL 9nCK\n" + wtr + one_clock_preamble)) == 6);
  CHECK(read_to_write(
            figure("burst 4\nCL 11nCK\nCWL 10nCK\n" + wtr + "read-to-write CL + BL/2 + 3nCK - CWL\n")) == 6);
}

TEST_CASE("A write follows a read as far as in figure 70 of a DDR3 datasheet", "[outside][dram]") {
  // AS4C512M16D3L: RL 5, WL 5, BC4: RL + tCCD/2 + 2 - WL
  CHECK(read_to_write(figure("burst 4\nCL 5nCK\nCWL 5nCK\ntWTR 4nCK\n" + rest + one_clock_preamble)) == 4);
}

TEST_CASE("A read follows a write as far as in Micron's DDR4 figures 177 to 182", "[outside][dram]") {
  const std::string latencies = "CL 11nCK\nCWL 9nCK\ntWTR_S 2nCK\ntWTR_L 4nCK\n" + rest + one_clock_preamble;
  const Grade full = figure("burst 8\n" + latencies);
  CHECK(write_to_read(full, true) == 15);
  CHECK(write_to_read(full, false) == 17);
  const Grade chopped = figure("burst 4\n" + latencies);  // BC4 fixed
  CHECK(write_to_read(chopped, true) == 13);
  CHECK(write_to_read(chopped, false) == 15);
}

TEST_CASE("A read, a precharge and an activate follow each other as in Micron's DDR4 figures 147 and 150",
          "[outside][dram]") {
  // RL 11, tRTP 6, tRP 11: RD T1, PRE T7, ACT T18
  const Grade grade = figure("burst 8\nCL 11nCK\nCWL 9nCK\ntWTR 4nCK\n" + rest + one_clock_preamble);
  DramConfig config = quiet(grade);
  config.scheduling = DramScheduling::first_come;
  DrivenChannel driven(config);
  driven.put({false, place(grade, 0, 5)}, 0);
  driven.put({false, place(grade, 0, 5, 1)}, 1001);
  driven.put({false, place(grade, 0, 6)}, 1001);
  driven.finish();
  const std::vector<CommandRecord> log = driven.legal_log();
  REQUIRE(log.size() == 6);
  CHECK(log[2].command == DramCommand::read);
  CHECK(log[2].clock == 1001);
  CHECK(log[3].command == DramCommand::precharge);
  CHECK(log[3].clock == 1007);
  CHECK(log[4].command == DramCommand::activate);
  CHECK(log[4].clock == 1018);
}

TEST_CASE("Bursts of one kind follow each other at tCCD", "[outside][dram]") {
  // Micron DDR4: tCCD_S = 4: WR T0, WR T4
  const Grade grade = figure(
      "burst 8\nCL 11nCK\nCWL 9nCK\ntWTR 4nCK\ntRTP 6nCK\ntRP 11nCK\ntCCD_S 4nCK\n"
      "tCCD_L 6nCK\n" +
      one_clock_preamble);
  CHECK(column_to_column(grade, true, true, true) == 4);
  CHECK(column_to_column(grade, true, true, false) == 6);
  CHECK(column_to_column(grade, false, false, true) == 4);
  CHECK(column_to_column(grade, false, false, false) == 6);
}

TEST_CASE("In the built-in grades reads and writes follow each other by the standards' formulas",
          "[outside][dram]") {
  const struct {
    const char* name;
    Clocks read_to_write, write_to_read_other, write_to_read_same;
  } table[] = {
      // RL + tCCD + 2 - WL (AS4C512M16D3L); CWL + BL/2 + tWTR
      {"ddr3-1600k", 9, 18, 18},
      // CL - CWL + BL/2 + 1 + tWPRE (AS4C256M16D4 Rev 1.0, Table 43)
      {"ddr4-2400t", 7, 23, 29},
      {"ddr4-3200aa", 8, 28, 36},
      // RL + RU(tDQSCK) + BL/2 - WL + tWPRE; WL + 1 + BL/2 + RU(tWTR) (JESD209-4; value from memory)
      {"lpddr4-3200", 30, 39, 39},
      // CWL + BL/2 + tWTR (JESD79-5; value from memory)
      {"ddr5-4800b", 14, 52, 70},
  };
  for (const auto& want : table) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    CHECK(read_to_write(grade) == want.read_to_write);
    CHECK(write_to_read(grade, false) == want.write_to_read_same);
    if (grade.bank_groups > 1) CHECK(write_to_read(grade, true) == want.write_to_read_other);
  }
}

}  // namespace earshot
