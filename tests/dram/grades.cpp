// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The built-in grades against the standards' and datasheets' tables, in clocks. Each value's source, and
// whether it was read there or is from memory, stands beside it in models/dram/grades/; the clocks are own
// arithmetic.
#include <catch2/catch.hpp>
#include <map>

#include "earshot/dram/grade_file.h"

namespace earshot {
namespace {

struct Core {
  const char* name;
  unsigned mt_per_s;  // twice the clock, in MHz
  unsigned cl, cwl, trcd, trp, trp_all, tras, trc, tccd_s, tccd_l, twr, twtr_s, twtr_l, trtp, trefi;
};

const Core cores[] = {
    {"ddr3-1600k", 1600, 11, 8, 11, 11, 11, 28, 39, 4, 4, 12, 6, 6, 6, 6240},
    {"ddr4-2400r", 2400, 16, 16, 16, 16, 16, 39, 55, 4, 6, 18, 3, 9, 9, 9360},
    {"ddr4-2400t", 2400, 17, 16, 17, 17, 17, 39, 56, 4, 6, 18, 3, 9, 9, 9360},
    {"ddr4-3200aa", 3200, 22, 20, 22, 22, 22, 52, 74, 4, 8, 24, 4, 12, 12, 12480},
    {"lpddr4-3200", 3200, 28, 14, 29, 29, 34, 68, 97, 8, 8, 29, 16, 16, 12, 6246},
    {"ddr5-4800b", 4800, 40, 38, 39, 39, 39, 77, 116, 8, 12, 72, 6, 24, 18, 9360},
};

// What depends on the device's width.
struct ByWidth {
  const char* name;
  unsigned width, page, bank_groups, trrd_s, trrd_l, tfaw;
};

const ByWidth widths[] = {
    {"ddr3-1600k", 4, 1024, 1, 5, 5, 24},     {"ddr3-1600k", 8, 1024, 1, 5, 5, 24},
    {"ddr3-1600k", 16, 2048, 1, 6, 6, 32},    {"ddr4-2400r", 4, 512, 4, 4, 6, 16},
    {"ddr4-2400r", 8, 1024, 4, 4, 6, 26},     {"ddr4-2400r", 16, 2048, 2, 7, 8, 36},
    {"ddr4-2400t", 4, 512, 4, 4, 6, 16},      {"ddr4-2400t", 8, 1024, 4, 4, 6, 26},
    {"ddr4-2400t", 16, 2048, 2, 7, 8, 36},    {"ddr4-3200aa", 4, 512, 4, 4, 8, 16},
    {"ddr4-3200aa", 8, 1024, 4, 4, 8, 34},    {"ddr4-3200aa", 16, 2048, 2, 9, 11, 48},
    {"lpddr4-3200", 16, 2048, 1, 16, 16, 64}, {"ddr5-4800b", 4, 1024, 8, 8, 12, 32},
    {"ddr5-4800b", 8, 1024, 8, 8, 12, 32},    {"ddr5-4800b", 16, 2048, 4, 8, 12, 40},
};

struct ByDensity {
  const char* name;
  unsigned density, trfc, trfc_bank;
};

const ByDensity densities[] = {
    {"ddr3-1600k", 1, 88, 0},     {"ddr3-1600k", 2, 128, 0},     {"ddr3-1600k", 4, 208, 0},
    {"ddr3-1600k", 8, 280, 0},    {"ddr4-2400r", 4, 312, 0},     {"ddr4-2400r", 8, 420, 0},
    {"ddr4-2400r", 16, 660, 0},   {"ddr4-2400t", 4, 312, 0},     {"ddr4-2400t", 8, 420, 0},
    {"ddr4-2400t", 16, 660, 0},   {"ddr4-3200aa", 4, 416, 0},    {"ddr4-3200aa", 8, 560, 0},
    {"ddr4-3200aa", 16, 880, 0},  {"lpddr4-3200", 2, 208, 96},   {"lpddr4-3200", 4, 288, 144},
    {"lpddr4-3200", 8, 448, 224}, {"lpddr4-3200", 16, 608, 304}, {"ddr5-4800b", 8, 468, 0},
    {"ddr5-4800b", 16, 708, 0},   {"ddr5-4800b", 24, 984, 0},    {"ddr5-4800b", 32, 984, 0},
};

// Command spacing; the formulas are those of the grade files.
struct Spacing {
  const char* name;
  unsigned read_to_write, write_to_read_s, write_to_read_l, write_to_precharge;
};

const Spacing spacings[] = {
    {"ddr3-1600k", 9, 18, 18, 24},  {"ddr4-2400r", 6, 23, 29, 38},   {"ddr4-2400t", 7, 23, 29, 38},
    {"ddr4-3200aa", 8, 28, 36, 48}, {"lpddr4-3200", 30, 39, 39, 51}, {"ddr5-4800b", 14, 52, 70, 118},
};

}  // namespace

TEST_CASE("The built-in grades have the standards' clocks", "[dram]") {
  REQUIRE(builtin_grades().size() == std::size(cores));
  for (std::size_t i = 0; i < std::size(cores); ++i) {
    const Core& want = cores[i];
    INFO(want.name);
    CHECK(builtin_grades()[i] == want.name);
    const Grade grade = load_grade(want.name);
    CHECK(grade.name == want.name);
    CHECK(grade.clock.edge(want.mt_per_s * 500'000) == 1'000'000'000'000);  // a second
    CHECK(grade.cl == want.cl);
    CHECK(grade.cwl == want.cwl);
    CHECK(grade.trcd == want.trcd);
    CHECK(grade.trp == want.trp);
    CHECK(grade.trp_all == want.trp_all);
    CHECK(grade.tras == want.tras);
    CHECK(grade.trc == want.trc);
    CHECK(grade.tccd_s == want.tccd_s);
    CHECK(grade.tccd_l == want.tccd_l);
    CHECK(grade.twr == want.twr);
    CHECK(grade.twtr_s == want.twtr_s);
    CHECK(grade.twtr_l == want.twtr_l);
    CHECK(grade.trtp == want.trtp);
    CHECK(grade.trefi == want.trefi);
    CHECK(grade.postponable == 8);
  }
}

TEST_CASE("Pages, bank groups, tRRD and tFAW follow the device's width", "[dram]") {
  for (const ByWidth& want : widths) {
    INFO(want.name << " x" << want.width);
    const Grade grade = load_grade(want.name, 0, want.width);
    CHECK(grade.device_bits == want.width);
    CHECK(grade.page_bytes == want.page);
    CHECK(grade.bank_groups == want.bank_groups);
    CHECK(grade.trrd_s == want.trrd_s);
    CHECK(grade.trrd_l == want.trrd_l);
    CHECK(grade.tfaw == want.tfaw);
  }
}

TEST_CASE("tRFC and the number of rows follow the device's density", "[dram]") {
  for (const ByDensity& want : densities) {
    INFO(want.name << " " << want.density << " Gbit");
    const Grade grade = load_grade(want.name, want.density);
    CHECK(grade.density_gbit == want.density);
    CHECK(grade.trfc == want.trfc);
    CHECK(grade.trfc_bank == want.trfc_bank);
    CHECK((grade.trefi_bank != 0) == (want.trfc_bank != 0));
    CHECK(grade.rows * grade.banks() * grade.page_bytes * 8 == std::uint64_t{want.density} << 30);
  }
  CHECK(load_grade("lpddr4-3200").trefi_bank == 780);
  // JESD79-4 addressing: 8 Gb x4 has 17 row bits, x8 16, x16 16
  CHECK(load_grade("ddr4-2400t", 8, 4).rows == 131072);
  CHECK(load_grade("ddr4-2400t", 8, 8).rows == 65536);
  CHECK(load_grade("ddr4-2400t", 8, 16).rows == 65536);
}

TEST_CASE("Command spacing comes from the standards' formulas", "[dram]") {
  for (const Spacing& want : spacings) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    CHECK(grade.read_to_write == want.read_to_write);
    CHECK(grade.write_to_read_s() == want.write_to_read_s);
    CHECK(grade.write_to_read_l() == want.write_to_read_l);
    CHECK(grade.write_to_precharge() == want.write_to_precharge);
  }
}

TEST_CASE("DDR5 writes to one bank group are further apart, most of all where ECC makes them read first",
          "[dram]") {
  CHECK(load_grade("ddr5-4800b", 16, 8).tccd_l_wr == 24);
  CHECK(load_grade("ddr5-4800b", 16, 4).tccd_l_wr == 48);
  CHECK(load_grade("ddr4-2400t").tccd_l_wr == 6);
}

TEST_CASE("Every value of every built-in grade has a source, and none contradicts another", "[dram]") {
  std::size_t read = 0, from_memory = 0;
  for (const std::string& name : builtin_grades()) {
    const GradeRange range = grade_range(name);
    for (const unsigned density : range.density_gbit) {
      for (const unsigned width : range.device_bits) {
        INFO(name << " " << density << " Gbit x" << width);
        const Grade grade = load_grade(name, density, width);
        CHECK(grade.problems().empty());
        CHECK(grade.burst_clocks() <= grade.tccd_s);
        for (const GradeSource& source : grade.sources) {
          if (source.parameter == "standard" || source.parameter == "density" || source.parameter == "width")
            continue;
          INFO(source.parameter);
          CHECK(!source.source.empty());
          ++(source.read ? read : from_memory);
        }
      }
    }
  }
  CHECK(read > 100);
  CHECK(from_memory > 100);
}

TEST_CASE("Peak bandwidth is two transfers a clock of the channel's width", "[dram]") {
  // MB/s: the speed bins' transfer rates times the usual width of a channel
  const std::map<std::string, std::uint64_t> peak = {{"ddr3-1600k", 12800}, {"ddr4-2400r", 19200},
                                                     {"ddr4-2400t", 19200}, {"ddr4-3200aa", 25600},
                                                     {"lpddr4-3200", 6400}, {"ddr5-4800b", 19200}};
  for (const auto& [name, want] : peak) {
    const Grade grade = load_grade(name);
    CHECK(grade.clock.clocks * 2 * 1'000'000 / grade.clock.picoseconds * grade.channel_bits / 8 == want);
  }
}

}  // namespace earshot
