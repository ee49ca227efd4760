// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The text form of a grade: what a user may write, and what is said about mistakes.
#include <catch2/catch.hpp>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <random>

#include "earshot/dram/grade_file.h"

namespace earshot {
namespace {

const std::string small = R"(grade toy
standard "none"
clock 1GHz
density 1
width 8
bank-groups 1
banks-per-group 8
page 1024
burst 8
channel 64
CL 10nCK
CWL 8nCK
tRCD 10ns
tRP 10ns
tRAS 30ns
tRC tRAS + tRP
tRRD 5ns
tFAW 20ns
tCCD 4nCK
tWR 15ns
tWTR 7.5ns
tRTP 7.5ns
read-to-write CL + BL/2 + 2nCK - CWL
tREFI 7.8us
tRFC 100ns
)";

// `small` with the first line that begins with `name` replaced; nothing else changes, so lines keep their
// numbers.
std::string with(const std::string& name, const std::string& line, std::string text = small) {
  const std::size_t at = text.find("\n" + name) + 1;
  REQUIRE(at != 0);
  return text.replace(at, text.find('\n', at) - at, line);
}

std::string error_of(const std::string& text, unsigned density = 0, unsigned width = 0) {
  try {
    parse_grade(text, "f", density, width);
  } catch (const GradeError& error) {
    return error.what();
  }
  return "";
}

}  // namespace

TEST_CASE("A small grade file gives the clocks that it says", "[dram]") {
  const Grade grade = parse_grade(small, "f");
  CHECK(grade.name == "toy");
  CHECK(grade.standard == "none");
  CHECK(grade.clock.clocks == 1);
  CHECK(grade.clock.picoseconds == 1000);
  CHECK(grade.trc == 40);
  CHECK(grade.trrd_s == 5);
  CHECK(grade.trrd_l == 5);
  CHECK(grade.twtr_s == 8);
  CHECK(grade.read_to_write == 8);
  CHECK(grade.trefi == 7800);
  CHECK(grade.rows == 16384);
}

TEST_CASE("What a grade file leaves out has the value that is usual", "[dram]") {
  const Grade grade = parse_grade(small, "f");
  CHECK(grade.trp_all == grade.trp);
  CHECK(grade.tccd_l_wr == grade.tccd_l);
  CHECK(grade.write_to_read_extra == 0);
  CHECK(grade.rank_switch == 2);
  CHECK(grade.trefi_bank == 0);
  CHECK(grade.trfc_bank == 0);
  CHECK(grade.postponable == 8);
  CHECK(grade.currents.part.empty());
}

TEST_CASE("A clock is a frequency, a period or a fraction, and exact", "[dram]") {
  const struct {
    const char* written;
    std::uint64_t clocks, picoseconds;
  } cases[] = {{"1200MHz", 3, 2500}, {"6400/3MHz", 4, 1875}, {"0.625ns", 1, 625},
               {"625ps", 1, 625},    {"2.4GHz", 3, 1250},    {"1333.333333MHz", 1333333333, 1000000000000}};
  for (const auto& each : cases) {
    INFO(each.written);
    const ExactClock clock = parse_grade(with("clock", "clock " + std::string(each.written)), "f").clock;
    CHECK(clock.clocks == each.clocks);
    CHECK(clock.picoseconds == each.picoseconds);
  }
}

TEST_CASE("Values may be maxima, sums, differences and names that stand above", "[dram]") {
  const auto tfaw = [](const std::string& value) {
    return parse_grade(with("tFAW", "tFAW " + value), "f").tfaw;
  };
  CHECK(tfaw("max(16nCK, 20.1ns)") == 21);
  CHECK(tfaw("max(32nCK,20.1ns)") == 32);
  CHECK(tfaw("max( 5nCK , max(6nCK, 7nCK) )") == 7);
  CHECK(tfaw("tRRD + tRRD_S + BL/2") == 14);
  CHECK(tfaw("20.4ns + 20.4ns") == 42);  // each rounded by itself
  CHECK(tfaw("40nCK - tRAS + 2nCK") == 12);
  CHECK(tfaw("0.5us") == 500);
  CHECK(tfaw("20001ps") == 21);
}

TEST_CASE("The rounding rule of a file is its own choice", "[dram]") {
  const std::string slow = with("clock", "clock 1200MHz");
  CHECK(parse_grade(with("tRFC", "tRFC 350ns", slow), "f").trfc == 420);
  CHECK(parse_grade(with("tRFC", "tRFC 350ns", with("clock", "clock 1200MHz\nrounding ddr4")), "f").trfc ==
        421);
  CHECK(parse_grade(with("tRFC", "tRFC 410ns", with("clock", "clock 2400MHz\nrounding ddr5")), "f").trfc ==
        983);
  CHECK(parse_grade(with("tRFC", "tRFC 410ns", with("clock", "clock 2400MHz\nrounding exact")), "f").trfc ==
        984);
}

TEST_CASE("Of lines with conditions the one that holds for the device counts", "[dram]") {
  std::string text = with("density", "density 4 8 16");
  text = with("width", "width 8 16", text);
  text = with("tRFC",
              "tRFC 1ns when density 4 8 width 8\ntRFC 2ns when density 4 8 width 16\n"
              "tRFC 3ns when density 16",
              text);
  CHECK(parse_grade(text, "f").trfc == 1);
  CHECK(parse_grade(text, "f", 8, 8).trfc == 1);
  CHECK(parse_grade(text, "f", 8, 16).trfc == 2);
  CHECK(parse_grade(text, "f", 16, 16).trfc == 3);
  CHECK(parse_grade(text, "f", 0, 16).trfc == 2);
}

TEST_CASE("Each value keeps what was written, its source, and whether it was read there", "[dram]") {
  std::string text = with("tRCD", "tRCD max(3nCK,10ns)   \"A datasheet, p. 3\" read  # a comment");
  text = with("tRP", "tRP 10ns \"A #2 standard\" memory", text);
  const Grade grade = parse_grade(text, "f");
  std::size_t found = 0;
  for (const GradeSource& source : grade.sources) {
    if (source.parameter == "tRCD") {
      CHECK(source.written == "max(3nCK, 10ns)");
      CHECK(source.source == "A datasheet, p. 3");
      CHECK(source.read);
      ++found;
    }
    if (source.parameter == "tRP") {
      CHECK(source.source == "A #2 standard");
      CHECK(!source.read);
      ++found;
    }
  }
  CHECK(found == 2);
}

TEST_CASE("Mistakes in a line are told with the line and what was expected", "[dram]") {
  const struct {
    const char *name, *line, *message;
  } cases[] = {
      {"tFAW", "tFAW 20", "f:18: '20', expected nCK, ps, ns or us after the number"},
      {"tFAW", "tFAW 20ms", "f:18: '20ms', expected nCK, ps, ns or us after the number"},
      {"tFAW", "tFAW 1.5nCK", "f:18: '1.5nCK', expected whole clocks"},
      {"tFAW", "tFAW 1.0005ns", "f:18: '1.0005ns', expected a whole number of picoseconds"},
      {"tFAW", "tFAW 1.ns", "f:18: '1.ns', expected digits after the point"},
      {"tFAW", "tFAW 2000us", "f:18: '2000us', expected at most 1 ms"},
      {"tFAW", "tFAW 12345678901ns", "f:18: '12345678901ns' has too many digits"},
      {"tFAW", "tFAW max(1ns, 2ns", "f:18: tFAW: expected ')' at the end"},
      {"tFAW", "tFAW max(1ns 2ns)", "f:18: tFAW: expected ',', not '2ns'"},
      {"tFAW", "tFAW 20ns 3", "f:18: tFAW: expected the end of the value, not '3'"},
      {"tFAW", "tFAW 20ns +", "f:18: tFAW: the value ends too early"},
      {"tFAW", "tFAW tABC", "f:18: tFAW: 'tABC' is neither a number with a unit nor the name of a time"},
      {"tFAW", "tFAW tRFC", "f:18: tRFC has no value further up"},
      {"tFAW", "tFAW 3nCK - 5nCK", "f:18: tFAW comes to -2 clocks, expected 0 to 1000000"},
      {"tFAW", "tFAW 1000001nCK - 1000000nCK", "f:18: '1000001nCK' is more than 1000000 clocks"},
      {"tFAW", "tFAW max(max(max(max(max(max(max(max(max(", "f:18: tFAW: more than 8 brackets"},
      {"tFAW", "tFAW", "f:18: tFAW: the value is missing"},
      {"tFAW", "tFAW 20ns \"unknown", "f:18: a quotation mark is not closed"},
      {"tFAW", "tFAW 20ns \"datasheet\"", "f:18: tFAW: expected read or memory after the source"},
      {"tFAW", "tFAW 20ns read", "f:18: tFAW: expected a source in quotation marks before read or memory"},
      {"tFAW", "tFAW 20ns when", "f:18: tFAW: expected density or width after when, not ''"},
      {"tFAW", "tFAW 20ns when page 3", "f:18: tFAW: expected density or width after when, not 'page'"},
      {"tFAW", "tFAW 20ns when density", "f:18: tFAW: expected numbers after density"},
      {"tFAW", "tFAW 20ns when density 3", "f:18: tFAW: density 3 is not among those listed further up"},
      {"bank-groups", "bank-groups 0", "f:6: '0', expected a whole number of 1 to 65536"},
      {"bank-groups", "bank-groups -1", "f:6: '-1', expected a whole number of 1 to 65536"},
      {"standard", "standard none", "f:2: standard: expected a text in quotation marks"},
  };
  for (const auto& each : cases) {
    INFO(each.line);
    CHECK(error_of(with(each.name, each.line)) == each.message);
  }
  CHECK(error_of(with("clock", "clock 100kHz"))
            .find("f:3: '100kHz', expected MHz, GHz, ps or ns after the number") == 0);
  CHECK(error_of(with("clock", "clock 0MHz")).find("f:3: '0MHz', expected a clock that is not 0") == 0);
  CHECK(error_of(with("clock", "clock 1GHz\nrounding up")) ==
        "f:4: rounding 'up', expected exact, ddr4 or ddr5");
  CHECK(error_of(small + "tFAW 21ns\n") == "f:26: tFAW is set again; line 18 holds for this device too");
  CHECK(error_of(small + "tRRD_L 9ns\n") == "f:26: tRRD_L is set again; line 17 holds for this device too");
}

TEST_CASE("All mistakes of a file are told at once, and an unknown name with those that are known",
          "[dram]") {
  std::string text = with("tRCD", "tRDC 10ns");
  text = with("CL", "CL ten", text);
  const std::string error = error_of(text);
  CHECK(error.find(
            "f:13: 'tRDC' is not known; expected one of grade, standard, clock, rounding, density, width, "
            "bank-groups") != std::string::npos);
  CHECK(error.find("f:11: CL: 'ten' is neither") != std::string::npos);
  CHECK(error.find("f: tRCD is missing for density 1, width 8") != std::string::npos);
  CHECK(error_of(with("tRRD", "tRRD fast")) ==
        "f:17: tRRD: 'fast' is neither a number with a unit nor the name of "
        "a time");
  CHECK(error_of("").find("f: needs a line grade\nf: needs a line standard\nf: needs a line clock") == 0);
}

TEST_CASE("A density or a width that a file does not cover is refused", "[dram]") {
  CHECK(error_of(small, 3).find("f:4: density 3 is not covered, expected one of 1") == 0);
  CHECK(error_of(small, 0, 16).find("f:5: width 16 is not covered, expected one of 8") == 0);
  CHECK_THROWS_WITH(load_grade("ddr4-2400t", 2),
                    Catch::Contains("ddr4-2400t.grade:6: density 2 is not covered, expected one of 8 4 16"));
}

TEST_CASE("Values that contradict each other are told with the line of the first of them", "[dram]") {
  const struct {
    const char *name, *line, *message;
  } cases[] = {
      {"tRC t", "tRC 39ns", "f:16: tRC of 39 clocks is below tRAS + tRP of 40"},
      {"CWL", "CWL 0nCK", "f:12: CWL is 0, expected at least 1"},
      {"tRCD", "tRCD 0ns", "f:13: tRCD is 0, expected at least 1"},
      {"burst", "burst 7", "f:9: burst of 7 beats, expected an even number: data moves on both edges"},
      {"tREFI", "tREFI 100ns",
       "f:24: tREFI of 100 clocks is not above tRFC of 100: nothing but refresh would happen"},
      {"tRAS", "tRAS 9ns", "f:15: tRAS of 9 clocks is below tRCD of 10"},
      {"tCCD", "tCCD 3nCK", "f:19: tCCD_S of 3 clocks is below the burst of 4"},
      {"read-to-write", "read-to-write 5nCK",
       "f:23: read-to-write of 5 clocks lets the write's data begin before the read's have ended"},
      {"channel", "channel 60", "f:10: channel of 60 bits is not a multiple of the device's 8"},
      {"page", "page 1020", "f:8: page of 1020 bytes is not a whole number of bursts"},
      {"tWTR", "tWTR_S 8ns\ntWTR_L 7ns", "f:22: tWTR_L of 7 clocks is below tWTR_S of 8"},
      {"tRFC", "tRFC 100ns\ntRFCpb 50ns", "f:26: tRFCpb is given, but not tREFIpb"},
      {"tRFC", "tRFC 100ns\nVDD 1.2V", "f: part is missing, although there are currents"},
      {"tFAW", "tFAW 4nCK", "f:18: tFAW of 4 clocks is below tRRD_S of 5"},
  };
  for (const auto& each : cases) {
    INFO(each.line);
    CHECK(error_of(with(each.name, each.line)) == each.message);
  }
  // tFAW below 4 tRRD is no contradiction: the window then never binds
  CHECK(error_of(with("tFAW", "tFAW 19nCK")) == "");
}

TEST_CASE("A grade made by hand is judged by the same rules", "[dram]") {
  Grade grade = load_grade("ddr4-2400t");
  CHECK(grade.problems().empty());
  grade.clock.clocks = 0;
  grade.cl = 0;
  grade.trc = 55;
  grade.rows = 0;
  CHECK(grade.problems() == std::vector<std::string>{"clock is 0",
                                                     "page of 1024 bytes in 16 banks leaves no row",
                                                     "CL is 0, expected at least 1",
                                                     "tRC of 55 clocks is below tRAS + tRP of 56"});
}

TEST_CASE("A grade is found by name, else by path", "[dram]") {
  const std::string path =
      (std::filesystem::temp_directory_path() / "earshot-grade-file-test.grade").string();
  std::ofstream(path) << small;
  CHECK(load_grade(path).trc == 40);
  std::ofstream(path) << with("tRC t", "tRC 39ns");
  CHECK_THROWS_WITH(load_grade(path), path + ":16: tRC of 39 clocks is below tRAS + tRP of 40");
  std::remove(path.c_str());
  CHECK_THROWS_WITH(
      load_grade("ddr4-2400"),
      "ddr4-2400: neither a built-in grade nor a file; built-in are ddr3-1600k, ddr4-2400r, ddr4-2400t, "
      "ddr4-3200aa, lpddr4-3200, ddr5-4800b");
  CHECK_THROWS_WITH(load_grade("/"), "/: is a directory, expected a grade file");
}

TEST_CASE("A mangled grade file is understood or refused with its lines", "[dram]") {
  std::mt19937 random(3);
  std::string original = small;
  std::ifstream file(std::string(EARSHOT_SOURCE) + "/models/dram/grades/lpddr4-3200.grade");
  original.append(std::istreambuf_iterator<char>(file), {});
  const std::string letters = "()+-,/.\"# \n019nCKspuBL";
  unsigned refused = 0;
  for (unsigned i = 0; i < 4000; ++i) {
    std::string text = i % 2 == 0 ? small : original.substr(small.size());
    for (unsigned changes = 1 + static_cast<unsigned>(random() % 3); changes > 0; --changes) {
      const std::size_t at = random() % text.size();
      switch (random() % 4) {
        case 0:
          text.erase(at, 1 + random() % 4);
          break;
        case 1:
          text.insert(at, 1, letters[random() % letters.size()]);
          break;
        case 2:
          text[at] = letters[random() % letters.size()];
          break;
        default:
          text.insert(at, text.substr(random() % text.size(), random() % 40));
          break;
      }
    }
    try {
      const Grade grade = parse_grade(text, "f");
      CHECK(grade.problems().empty());
    } catch (const GradeError& error) {
      ++refused;
      const std::string message = error.what();
      CHECK(message.substr(0, 2) == "f:");
    }
  }
  CHECK(refused > 1000);
  CHECK(refused < 4000);
}

TEST_CASE("A file's range is what it covers, the usual one first", "[dram]") {
  const GradeRange range = grade_range("ddr3-1600k");
  CHECK(range.density_gbit == std::vector<unsigned>{4, 1, 2, 8});
  CHECK(range.device_bits == std::vector<unsigned>{8, 4, 16});
}

TEST_CASE("A built-in grade is the file of its name", "[dram]") {
  for (const std::string& name : builtin_grades()) {
    const std::string path = std::string(EARSHOT_SOURCE) + "/models/dram/grades/" + name + ".grade";
    INFO(path);
    const Grade from_file = load_grade(path), built_in = load_grade(name);
    CHECK(from_file.name == name);
    CHECK(from_file.trc == built_in.trc);
    CHECK(from_file.sources.size() == built_in.sources.size());
  }
}

}  // namespace earshot
