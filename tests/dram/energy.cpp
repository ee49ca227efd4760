// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The energy estimate against own arithmetic from currents that were read in the datasheets named in the
// grade files, by the formulas of Micron TN-41-01 and TN-40-07 (from memory). No publisher printed these
// answers.
#include "earshot/dram/energy.h"

#include <catch2/catch.hpp>

namespace earshot {
namespace {

// Of one device.
EnergyEstimate one_device(const Grade& grade, const DramCounts& counts) {
  return estimate_energy(grade, counts, grade.device_bits);
}

}  // namespace

TEST_CASE("Energy of a 4Gb x16 DDR3-1600 device is what its currents say", "[dram]") {
  const Grade grade = load_grade("ddr3-1600k", 4, 16);  // AS4C256M16D3B-12
  DramCounts counts;
  counts.activates = 1;
  CHECK(one_device(grade, counts).activate_pj == Approx(1826.25));  // 37.462 mW for tRC
  counts = {};
  counts.read_bursts = 1;
  CHECK(one_device(grade, counts).read_pj == Approx(154.5 * 5));  // mW for 4 clocks of 1.25 ns
  counts = {};
  counts.write_bursts = 1;
  CHECK(one_device(grade, counts).write_pj == Approx(177.0 * 5));
  counts = {};
  counts.refreshes = 1;
  CHECK(one_device(grade, counts).refresh_pj == Approx(192.0 * 260));
  counts = {};
  counts.rank_clocks_active = 800;  // 1 us
  CHECK(one_device(grade, counts).background_pj == Approx(48.0 * 1000));
  counts = {};
  counts.rank_clocks_precharged = 800;
  CHECK(one_device(grade, counts).background_pj == Approx(37.5 * 1000));
}

TEST_CASE("Energy of an 8Gb x16 DDR4-2400 device includes what VPP supplies", "[dram]") {
  const Grade grade = load_grade("ddr4-2400t", 8, 16);  // a device of MTA4ATF51264AZ
  DramCounts counts;
  counts.activates = 1;
  // 44.38 + 2.5 mW for tRC = 46.16 ns; in whole clocks it is 46.667 ns, at a little less power
  CHECK(one_device(grade, counts).activate_pj / (56 / 1.2) == Approx(46.9).epsilon(0.002));
  CHECK(one_device(grade, counts).activate_pj ==
        Approx((80 * 56 - 47 * 39 - 34 * 17) * 1.2 / 1.2 + 1 * 2.5 * 56 / 1.2));
  counts = {};
  counts.read_bursts = 3;
  CHECK(one_device(grade, counts).read_pj == Approx(3 * 235.2 * 4 / 1.2));
  counts = {};
  counts.write_bursts = 1;
  CHECK(one_device(grade, counts).write_pj == Approx(217.2 * 4 / 1.2));
  counts = {};
  counts.refreshes = 1;
  CHECK(one_device(grade, counts).refresh_pj == Approx((279.6 + 62.5) * 350));
  counts = {};
  counts.rank_clocks_active = 1200;  // 1 us
  CHECK(one_device(grade, counts).background_pj == Approx((56.4 + 7.5) * 1000));
  counts = {};
  counts.rank_clocks_precharged = 1200;
  CHECK(one_device(grade, counts).background_pj == Approx((40.8 + 7.5) * 1000));
}

TEST_CASE("All devices of a rank take part, and the total is the sum of its parts", "[dram]") {
  const Grade grade = load_grade("ddr3-1600k", 4, 16);
  DramCounts counts;
  counts.activates = 7;
  counts.read_bursts = 11;
  counts.write_bursts = 13;
  counts.refreshes = 2;
  counts.rank_clocks_active = 1000;
  counts.rank_clocks_precharged = 500;
  const EnergyEstimate one = one_device(grade, counts), four = estimate_energy(grade, counts);
  CHECK(four.total_pj() == Approx(4 * one.total_pj()));
  CHECK(one.total_pj() ==
        Approx(7 * 1826.25 + 11 * 772.5 + 13 * 885.0 + 2 * 49920.0 + 60000.0 + 500 * 1.25 * 37.5));
  CHECK(estimate_energy(grade, counts, 32).total_pj() == Approx(2 * one.total_pj()));
}

TEST_CASE("Eight refreshes of one bank each cost as much as one of all eight", "[dram]") {
  const Grade grade = load_grade("ddr3-1600k", 4, 16);
  DramCounts all, single;
  all.refreshes = 3;
  single.bank_refreshes = 24;
  CHECK(one_device(grade, single).refresh_pj == Approx(one_device(grade, all).refresh_pj));
}

TEST_CASE("An estimate says that it is one, by which method and of which part", "[dram]") {
  const EnergyEstimate energy = estimate_energy(load_grade("ddr4-2400t", 8, 16), {});
  CHECK(energy.known);
  CHECK(energy.part == "MTA4ATF51264AZ, die Rev B");
  CHECK(energy.note ==
        "an estimate from the datasheet's largest currents, by the method of Micron TN-41-01 and "
        "TN-40-07, without power-down, drivers and terminations");
}

TEST_CASE("Without a part's currents there is no estimate, and it says why", "[dram]") {
  DramCounts counts;
  counts.activates = 7;
  const EnergyEstimate energy = estimate_energy(load_grade("ddr5-4800b"), counts);
  CHECK(!energy.known);
  CHECK(energy.total_pj() == 0);
  CHECK(energy.note ==
        "no estimate: the supply currents of a part of ddr5-4800b with 16 Gbit and 8 data bits are not "
        "known");
}

}  // namespace earshot
