// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Sustained bandwidth against the bounds that follow from the timing parameters, as fractions of the data bus
// and in GB/s. The parameters' sources stand in models/dram/grades/; the bounds are own arithmetic.
#include <catch2/catch.hpp>
#include <random>

#include "outside/dram_drive.h"

namespace earshot {
namespace {

// Clocks from one end of a burst to the next, over the second half of the stream.
double clocks_per_burst(DramConfig config, const std::vector<DramRequest>& requests) {
  DrivenChannel driven(config);
  driven.stream(requests);
  std::vector<Clocks> columns;
  for (const CommandRecord& command : driven.legal_log()) {
    const DramCommand kind = command.command;
    if (kind == DramCommand::read || kind == DramCommand::read_precharge || kind == DramCommand::write ||
        kind == DramCommand::write_precharge) {
      columns.push_back(command.clock);
    }
  }
  REQUIRE(columns.size() == requests.size());
  const std::size_t half = columns.size() / 2;
  return static_cast<double>(columns.back() - columns[half]) / static_cast<double>(columns.size() - 1 - half);
}

double fraction(const Grade& grade, double clocks) {
  return grade.burst_clocks() / clocks;
}

double gigabytes_per_second(const Grade& grade, double of_peak) {
  const double transfers =
      2e12 * static_cast<double>(grade.clock.clocks) / static_cast<double>(grade.clock.picoseconds);
  return of_peak * transfers * grade.channel_bits / 8 / 1e9;
}

constexpr unsigned bursts = 4801;  // so that half of them is a whole number of rounds in every test below

// A new row each time: in all banks by turns, or in one.
std::vector<DramRequest> new_rows(const Grade& grade, unsigned banks, bool write) {
  std::vector<DramRequest> requests;
  for (unsigned i = 0; i < bursts; ++i) requests.push_back({write, place(grade, i % banks, 1 + i / banks)});
  return requests;
}

// k reads of each row, in one bank.
std::vector<DramRequest> hits_per_row(const Grade& grade, unsigned k) {
  std::vector<DramRequest> requests;
  for (unsigned i = 0; i < bursts; ++i) requests.push_back({false, place(grade, 0, 1 + i / k, i % k)});
  return requests;
}

// An activate that loses its clock of the command bus to a read delays all that follow; a read only itself.
DramConfig closing(const Grade& grade) {
  DramConfig config = quiet(grade);
  config.rows = DramRows::closed;
  config.row_first = true;
  return config;
}

}  // namespace

TEST_CASE("Row hits fill the data bus, in one bank group only as far as tCCD_L lets them",
          "[outside][dram]") {
  const struct {
    const char* name;
    double same_group;
  } table[] = {{"ddr3-1600k", 1.0},
               {"ddr4-2400t", 0.6667},
               {"ddr4-3200aa", 0.5},
               {"lpddr4-3200", 1.0},
               {"ddr5-4800b", 0.6667}};
  for (const auto& want : table) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    const auto columns = static_cast<unsigned>(quiet(grade).columns());
    std::vector<DramRequest> same, turning;
    for (unsigned i = 0; i < bursts; ++i) {
      same.push_back({false, place(grade, 0, 1, i % columns)});
      turning.push_back({false, place(grade, i % grade.bank_groups, 1, i / grade.bank_groups % columns)});
    }
    CHECK(fraction(grade, clocks_per_burst(quiet(grade), same)) == Approx(want.same_group).epsilon(1e-4));
    CHECK(clocks_per_burst(quiet(grade), turning) == grade.burst_clocks());
  }
}

TEST_CASE("New rows in all banks by turns go as fast as tFAW, tRRD and tRC allow", "[outside][dram]") {
  const struct {
    const char* name;
    double of_peak, gb_per_s;
  } table[] = {{"ddr3-1600k", 0.6667, 8.533},
               {"ddr4-2400t", 0.6154, 11.815},
               {"ddr4-3200aa", 0.4706, 12.047},
               {"lpddr4-3200", 0.5, 3.2},
               {"ddr5-4800b", 1.0, 19.2}};
  for (const auto& want : table) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    const double measured =
        fraction(grade, clocks_per_burst(closing(grade), new_rows(grade, grade.banks(), false)));
    CHECK(measured == Approx(want.of_peak).epsilon(2e-4));
    CHECK(gigabytes_per_second(grade, measured) == Approx(want.gb_per_s).epsilon(2e-4));
  }
}

TEST_CASE("With wide windows tRRD, then the banks' tRC, limit new rows", "[outside][dram]") {
  const struct {
    const char* name;
    double trrd, trc;
  } table[] = {{"ddr3-1600k", 0.8, 0.8205}, {"ddr4-3200aa", 1.0, 0.8649}, {"lpddr4-3200", 0.5, 0.6598}};
  for (const auto& want : table) {
    INFO(want.name);
    Grade grade = load_grade(want.name);
    grade.tfaw = 1;
    const double both =
        fraction(grade, clocks_per_burst(closing(grade), new_rows(grade, grade.banks(), false)));
    CHECK(both == Approx(std::min(want.trrd, want.trc)).epsilon(1e-3));
    grade.trrd_s = grade.trrd_l = 1;
    const double banks =
        fraction(grade, clocks_per_burst(closing(grade), new_rows(grade, grade.banks(), false)));
    CHECK(banks == Approx(want.trc).epsilon(1e-3));
  }
}

TEST_CASE("New rows in random banks stay below the bound, and near it with a deep queue", "[outside][dram]") {
  for (const char* name : {"ddr3-1600k", "ddr4-2400t", "ddr4-3200aa", "lpddr4-3200", "ddr5-4800b"}) {
    INFO(name);
    const Grade grade = load_grade(name);
    const double bound = std::max({grade.tfaw / 4.0, grade.trrd_s * 1.0, grade.tccd_s * 1.0,
                                   static_cast<double>(grade.trc) / grade.banks()});
    std::mt19937 random(20000);
    std::vector<DramRequest> requests;
    for (unsigned i = 0; i < bursts; ++i) {
      requests.push_back({false, place(grade, static_cast<unsigned>(random() % grade.banks()), 1 + i)});
    }
    DramConfig config = closing(grade);
    config.read_queue = 128;
    config.age_cap = 1'000'000;
    const double measured = clocks_per_burst(config, requests);
    CHECK(measured >= bound * 0.9999);
    CHECK(measured < bound * 1.1);
  }
}

TEST_CASE("New rows in one bank are read once in tRC, and written once in as long as a write takes",
          "[outside][dram]") {
  const struct {
    const char* name;
    double read, write;    // clocks
    double read_gb_per_s;  // 0: not computed
  } table[] = {{"ddr3-1600k", 39, 46, 1.3128},  {"ddr4-2400r", 55, 70, 0},   {"ddr4-2400t", 56, 72, 1.3714},
               {"ddr4-3200aa", 74, 92, 1.3838}, {"lpddr4-3200", 97, 109, 0}, {"ddr5-4800b", 116, 196, 0}};
  for (const auto& want : table) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    for (const DramRows rows : {DramRows::open, DramRows::closed}) {
      DramConfig config = quiet(grade);
      config.rows = rows;
      const double read = clocks_per_burst(config, new_rows(grade, 1, false));
      CHECK(read == want.read);
      if (want.read_gb_per_s > 0) {
        CHECK(gigabytes_per_second(grade, fraction(grade, read)) == Approx(want.read_gb_per_s).epsilon(1e-4));
      }
      CHECK(clocks_per_burst(config, new_rows(grade, 1, true)) == want.write);
    }
  }
}

TEST_CASE("k reads of a row share the cost of opening it", "[outside][dram]") {
  // (BL/2) k / (max(tRAS, tRCD + (k - 1) tCCD_L + tRTP) + tRP)
  const struct {
    const char* name;
    double of_8, of_16;
  } table[] = {{"ddr3-1600k", 0.5714, 0.7273},
               {"ddr4-2400t", 0.3765, 0.4812},
               {"ddr4-3200aa", 0.2857, 0.3636},
               {"lpddr4-3200", 0.5079, 0.6737},
               {"ddr5-4800b", 0.3556, 0.4638}};
  for (const auto& want : table) {
    INFO(want.name);
    const Grade grade = load_grade(want.name);
    CHECK(fraction(grade, clocks_per_burst(quiet(grade), hits_per_row(grade, 8))) ==
          Approx(want.of_8).epsilon(2e-4));
    CHECK(fraction(grade, clocks_per_burst(quiet(grade), hits_per_row(grade, 16))) ==
          Approx(want.of_16).epsilon(2e-4));
  }
}

}  // namespace earshot
