// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/grade.h"

#include <cerrno>
#include <cstring>
#include <filesystem>
#include <fstream>

#include "earshot/dram/builtin_grades.h"
#include "earshot/dram/grade_file.h"

namespace earshot {

namespace {

// Far more than any grade needs; keeps a mistaken path (a device, a recording) from filling the memory.
constexpr std::size_t most_bytes = 1 << 20;

std::string read_file(const std::string& path) {
  std::error_code ignored;
  if (std::filesystem::is_directory(path, ignored)) {
    throw GradeError(path + ": is a directory, expected a grade file");
  }
  errno = 0;
  std::ifstream file(path, std::ios::binary);
  if (!file) throw GradeError(path + ": cannot be read: " + std::strerror(errno));
  std::string text(most_bytes + 1, '\0');
  file.read(text.data(), static_cast<std::streamsize>(text.size()));
  if (file.bad()) throw GradeError(path + ": cannot be read: " + std::strerror(errno));
  text.resize(static_cast<std::size_t>(file.gcount()));
  if (text.size() > most_bytes) throw GradeError(path + ": more than 1 MiB, too long for a grade file");
  return text;
}

struct GradeText {
  std::string text, origin;
};

GradeText find_text(const std::string& name_or_path) {
  for (const BuiltinGrade& grade : builtin_grade_texts()) {
    if (grade.name == name_or_path) return {grade.text, grade.name + ".grade"};
  }
  std::error_code ignored;
  if (std::filesystem::exists(name_or_path, ignored)) return {read_file(name_or_path), name_or_path};
  std::string message = name_or_path + ": neither a built-in grade nor a file; built-in are";
  const char* separator = " ";
  for (const std::string& known : builtin_grades()) {
    message += separator + known;
    separator = ", ";
  }
  throw GradeError(message);
}

std::string number(double value) {
  std::string text = std::to_string(value);
  text.erase(text.find_last_not_of('0') + 1);
  if (text.back() == '.') text.pop_back();
  return text;
}

class Contradictions {
 public:
  void least(const char* name, std::uint64_t value, std::uint64_t least) {
    if (value < least) {
      found_.push_back(std::string(name) + " is " + std::to_string(value) + ", expected at least " +
                       std::to_string(least));
    }
  }
  void not_below(const char* name, std::uint64_t value, const char* other, std::uint64_t bound) {
    if (value < bound) {
      found_.push_back(std::string(name) + " of " + std::to_string(value) + " clocks is below " + other +
                       " of " + std::to_string(bound));
    }
  }
  void current_not_below(const char* name, double value, const char* other, double bound) {
    if (value < bound) found_.push_back(std::string(name) + " of " + number(value) + " mA is below " + other);
  }
  void add_if(bool wrong, const std::string& what) {
    if (wrong) found_.push_back(what);
  }
  std::vector<std::string> take() { return std::move(found_); }

 private:
  std::vector<std::string> found_;
};

void check_organisation(const Grade& grade, Contradictions& problems) {
  problems.add_if(grade.clock.clocks == 0 || grade.clock.picoseconds == 0, "clock is 0");
  problems.least("density", grade.density_gbit, 1);
  problems.least("bank-groups", grade.bank_groups, 1);
  problems.least("banks-per-group", grade.banks_per_group, 1);
  problems.least("page", grade.page_bytes, 1);
  problems.least("channel", grade.channel_bits, 1);
  problems.add_if(grade.rows == 0, "page of " + std::to_string(grade.page_bytes) + " bytes in " +
                                       std::to_string(grade.banks()) + " banks leaves no row");
  const std::string burst = "burst of " + std::to_string(grade.burst_length) + " beats";
  const bool odd = grade.burst_length == 0 || grade.burst_length % 2 != 0;
  problems.add_if(odd, burst + ", expected an even number: data moves on both edges");
  const unsigned width = grade.device_bits;
  problems.add_if(width != 4 && width != 8 && width != 16 && width != 32,
                  "width of " + std::to_string(width) + " bits, expected 4, 8, 16 or 32");
  if (width == 0) return;
  problems.add_if(grade.channel_bits % width != 0, "channel of " + std::to_string(grade.channel_bits) +
                                                       " bits is not a multiple of the device's " +
                                                       std::to_string(width));
  const std::uint64_t burst_bits = std::uint64_t{grade.burst_length} * width;
  problems.add_if(!odd && std::uint64_t{grade.page_bytes} * 8 % burst_bits != 0,
                  "page of " + std::to_string(grade.page_bytes) + " bytes is not a whole number of bursts");
}

void check_times(const Grade& grade, Contradictions& problems) {
  const struct {
    const char* name;
    unsigned value;
  } positive[] = {{"CL", grade.cl},         {"CWL", grade.cwl},       {"tRCD", grade.trcd},
                  {"tRP", grade.trp},       {"tRAS", grade.tras},     {"tRC", grade.trc},
                  {"tRRD_S", grade.trrd_s}, {"tFAW", grade.tfaw},     {"tCCD_S", grade.tccd_s},
                  {"tWR", grade.twr},       {"tWTR_S", grade.twtr_s}, {"tRTP", grade.trtp},
                  {"tREFI", grade.trefi},   {"tRFC", grade.trfc},     {"read-to-write", grade.read_to_write}};
  for (const auto& [name, value] : positive) problems.least(name, value, 1);
  problems.not_below("tRPab", grade.trp_all, "tRP", grade.trp);
  problems.not_below("tRAS", grade.tras, "tRCD", grade.trcd);
  problems.not_below("tRC", grade.trc, "tRAS + tRP", std::uint64_t{grade.tras} + grade.trp);
  problems.not_below("tRRD_L", grade.trrd_l, "tRRD_S", grade.trrd_s);
  problems.not_below("tFAW", grade.tfaw, "tRRD_S", grade.trrd_s);
  problems.not_below("tCCD_S", grade.tccd_s, "the burst", grade.burst_clocks());
  problems.not_below("tCCD_L", grade.tccd_l, "tCCD_S", grade.tccd_s);
  problems.not_below("tCCD_L_WR", grade.tccd_l_wr, "tCCD_L", grade.tccd_l);
  problems.not_below("tWTR_L", grade.twtr_l, "tWTR_S", grade.twtr_s);
  problems.add_if(grade.read_to_write + grade.cwl < grade.cl + grade.burst_clocks(),
                  "read-to-write of " + std::to_string(grade.read_to_write) +
                      " clocks lets the write's data begin before the read's have ended");
  problems.add_if(grade.trefi > 0 && grade.trefi <= grade.trfc,
                  "tREFI of " + std::to_string(grade.trefi) + " clocks is not above tRFC of " +
                      std::to_string(grade.trfc) + ": nothing but refresh would happen");
  problems.add_if(
      (grade.trefi_bank == 0) != (grade.trfc_bank == 0),
      grade.trefi_bank == 0 ? "tRFCpb is given, but not tREFIpb" : "tREFIpb is given, but not tRFCpb");
  problems.add_if(grade.trefi_bank > 0 && grade.trefi_bank <= grade.trfc_bank,
                  "tREFIpb of " + std::to_string(grade.trefi_bank) + " clocks is not above tRFCpb of " +
                      std::to_string(grade.trfc_bank) + ": nothing but refresh would happen");
}

void check_currents(const SupplyCurrents& currents, Contradictions& problems) {
  const bool some = currents.idd0 > 0 || currents.idd2n > 0 || currents.idd3n > 0 || currents.idd4r > 0 ||
                    currents.idd4w > 0 || currents.idd5b > 0 || currents.vdd_mv > 0;
  problems.add_if(some && currents.part.empty(), "part is missing, although there are currents");
  if (currents.part.empty()) return;
  problems.add_if(currents.vdd_mv == 0, "VDD is missing, although there is a part");
  const struct {
    const char* name;
    double value;
  } positive[] = {{"IDD0", currents.idd0}, {"IDD2N", currents.idd2n}, {"IDD3N", currents.idd3n}};
  for (const auto& [name, value] : positive) {
    problems.add_if(!(value > 0), std::string(name) + " is missing, although there is a part");
  }
  problems.current_not_below("IDD3N", currents.idd3n, "IDD2N", currents.idd2n);
  problems.current_not_below("IDD0", currents.idd0, "IDD3N", currents.idd3n);
  problems.current_not_below("IDD4R", currents.idd4r, "IDD3N", currents.idd3n);
  problems.current_not_below("IDD4W", currents.idd4w, "IDD3N", currents.idd3n);
  problems.current_not_below("IDD5B", currents.idd5b, "IDD3N", currents.idd3n);
  const bool pump = currents.ipp0 > 0 || currents.ipp3n > 0 || currents.ipp5b > 0;
  problems.add_if(pump && currents.vpp_mv == 0, "VPP is missing, although there are currents of it");
  problems.current_not_below("IPP0", currents.ipp0, "IPP3N", currents.ipp3n);
  problems.current_not_below("IPP5B", currents.ipp5b, "IPP3N", currents.ipp3n);
}

}  // namespace

// Not a contradiction: tFAW below 4 tRRD. The window then never binds.
std::vector<std::string> Grade::problems() const {
  Contradictions found;
  check_organisation(*this, found);
  check_times(*this, found);
  check_currents(currents, found);
  return found.take();
}

const std::vector<std::string>& builtin_grades() {
  static const std::vector<std::string> names = [] {
    std::vector<std::string> all;
    for (const BuiltinGrade& grade : builtin_grade_texts()) all.push_back(grade.name);
    return all;
  }();
  return names;
}

Grade load_grade(const std::string& name_or_path, unsigned density_gbit, unsigned device_bits) {
  const GradeText found = find_text(name_or_path);
  return parse_grade(found.text, found.origin, density_gbit, device_bits);
}

GradeRange grade_range(const std::string& name_or_path) {
  const GradeText found = find_text(name_or_path);
  return range_of_grade_text(found.text, found.origin);
}

}  // namespace earshot
