// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Times to clocks. DDR4's and DDR5's rules (JESD79-4B section 13.5, JESD79-5 section 13.2) are from memory;
// what they give, and what plain rounding of a printed period would give, is own arithmetic.
#include "earshot/dram/rounding.h"

#include <catch2/catch.hpp>

#include "earshot/dram/grade_file.h"

namespace earshot {
namespace {

const ExactClock mhz_1200 = {6, 5000};
const ExactClock mhz_2400 = {12, 5000};
const ExactClock printed_0833 = {1, 833};
const ExactClock printed_0416 = {1, 416};

struct Vector {
  const char* what;
  Picoseconds time;
  Clocks plain;  // by the period as printed
  Clocks exact;
  Clocks guard_band;  // JEDEC
};

}  // namespace

TEST_CASE("Minima of DDR4-2400 round up by the exact clock and by JEDEC's rule", "[dram]") {
  const Vector vectors[] = {
      {"tCCD_L", 5000, 7, 6, 6},     {"tWR", 15000, 19, 18, 18},      {"tWTR_L, tRTP", 7500, 10, 9, 9},
      {"tWTR_S", 2500, 4, 3, 3},     {"tFAW x16", 30000, 37, 36, 36}, {"tRFC 8 Gb", 350000, 421, 420, 421},
      {"tRCD R", 13320, 16, 16, 16}, {"tRCD T", 14160, 17, 17, 17},
  };
  for (const Vector& vector : vectors) {
    INFO(vector.what);
    CHECK(clocks_at_least(vector.time, printed_0833, Rounding::exact) == vector.plain);
    CHECK(clocks_at_least(vector.time, mhz_1200, Rounding::exact) == vector.exact);
    CHECK(clocks_at_least(vector.time, mhz_1200, Rounding::ddr4) == vector.guard_band);
  }
}

TEST_CASE("Minima of DDR5-4800 round up by the exact clock and by JEDEC's rule", "[dram]") {
  const Vector vectors[] = {
      {"tRRD_L, tCCD_L", 5000, 13, 12, 12},
      {"tFAW x8", 13333, 33, 32, 32},
      {"tWR", 30000, 73, 72, 72},
      {"tRCD", 16000, 39, 39, 39},
      // JEDEC's rule forgives 0.3 % of the time, here a whole clock
      {"tRFC 32 Gb", 410000, 986, 984, 983},
  };
  for (const Vector& vector : vectors) {
    INFO(vector.what);
    CHECK(clocks_at_least(vector.time, printed_0416, Rounding::exact) == vector.plain);
    CHECK(clocks_at_least(vector.time, mhz_2400, Rounding::exact) == vector.exact);
    CHECK(clocks_at_least(vector.time, mhz_2400, Rounding::ddr5) == vector.guard_band);
  }
}

TEST_CASE("A period in whole picoseconds needs no guard band", "[dram]") {
  const ExactClock mhz_1600 = {1, 625};
  for (const Rounding rounding : {Rounding::exact, Rounding::ddr4}) {
    CHECK(clocks_at_least(13750, mhz_1600, rounding) == 22);
    CHECK(clocks_at_least(45750, mhz_1600, rounding) == 74);
    CHECK(clocks_at_least(21000, mhz_1600, rounding) == 34);
    CHECK(clocks_at_least(6400, mhz_1600, rounding) == 11);
    CHECK(clocks_at_least(0, mhz_1600, rounding) == 0);
  }
}

TEST_CASE("Maxima round down", "[dram]") {
  CHECK(clocks_at_most(7'800'000, mhz_1200) == 9360);  // exactly
  CHECK(clocks_at_most(7'800'833, mhz_1200) == 9360);  // 833.33 ps make a clock
  CHECK(clocks_at_most(7'800'834, mhz_1200) == 9361);
  CHECK(clocks_at_most(3'904'000, {1, 625}) == 6246);  // 6246.4: tREFI of LPDDR4-3200
  CHECK(clocks_at_most(488'000, {1, 625}) == 780);     // 780.8: of one bank
}

TEST_CASE("Both rules give every built-in DDR4 and DDR5 grade the same clocks, but for long refreshes",
          "[dram]") {
  for (const std::string name : {"ddr4-2400r", "ddr4-2400t", "ddr4-3200aa", "ddr5-4800b"}) {
    const bool ddr5 = name == "ddr5-4800b";
    const GradeRange range = grade_range(name);
    for (const unsigned density : range.density_gbit) {
      for (const unsigned width : range.device_bits) {
        INFO(name << " " << density << " Gbit x" << width);
        const Grade grade = load_grade(name, density, width);
        for (const GradeSource& source : grade.sources) {
          if (source.written.find("ns") == std::string::npos || source.parameter == "tRFC") continue;
          // every number of ns in it
          for (std::size_t at = 0; (at = source.written.find("ns", at)) != std::string::npos; ++at) {
            const std::size_t from = source.written.find_last_not_of("0123456789.", at - 1) + 1;
            const double ns = std::stod(source.written.substr(from, at - from));
            const Picoseconds time = static_cast<Picoseconds>(ns * 1000 + 0.5);
            INFO(source.parameter << " " << source.written);
            CHECK(clocks_at_least(time, grade.clock, Rounding::exact) ==
                  clocks_at_least(time, grade.clock, ddr5 ? Rounding::ddr5 : Rounding::ddr4));
          }
        }
      }
    }
  }
}

}  // namespace earshot
