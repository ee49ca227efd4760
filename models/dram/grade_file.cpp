// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/grade_file.h"

#include <algorithm>
#include <map>
#include <set>

#include "earshot/dram/builtin_grades.h"
#include "earshot/dram/grade_words.h"
#include "earshot/dram/rounding.h"

namespace earshot {
namespace {

constexpr std::uint64_t most_clocks = 1'000'000;
constexpr std::uint64_t most_count = 65'536;
constexpr int most_nested = 8;

enum class Kind { count, minimum, maximum };  // a plain number; clocks, rounded up; clocks, rounded down

struct Parameter {
  const char* name;
  Kind kind;
  bool needed;
  std::vector<unsigned Grade::*> fields;
};

const std::vector<Parameter>& parameters() {
  using G = Grade;
  static const std::vector<Parameter> all = {
      {"bank-groups", Kind::count, true, {&G::bank_groups}},
      {"banks-per-group", Kind::count, true, {&G::banks_per_group}},
      {"page", Kind::count, true, {&G::page_bytes}},
      {"burst", Kind::count, true, {&G::burst_length}},
      {"channel", Kind::count, true, {&G::channel_bits}},
      {"CL", Kind::minimum, true, {&G::cl}},
      {"CWL", Kind::minimum, true, {&G::cwl}},
      {"tRCD", Kind::minimum, true, {&G::trcd}},
      {"tRP", Kind::minimum, true, {&G::trp}},
      {"tRPab", Kind::minimum, false, {&G::trp_all}},
      {"tRAS", Kind::minimum, true, {&G::tras}},
      {"tRC", Kind::minimum, true, {&G::trc}},
      {"tRRD", Kind::minimum, false, {&G::trrd_s, &G::trrd_l}},
      {"tRRD_S", Kind::minimum, true, {&G::trrd_s}},
      {"tRRD_L", Kind::minimum, true, {&G::trrd_l}},
      {"tFAW", Kind::minimum, true, {&G::tfaw}},
      {"tCCD", Kind::minimum, false, {&G::tccd_s, &G::tccd_l}},
      {"tCCD_S", Kind::minimum, true, {&G::tccd_s}},
      {"tCCD_L", Kind::minimum, true, {&G::tccd_l}},
      {"tCCD_L_WR", Kind::minimum, false, {&G::tccd_l_wr}},
      {"tWR", Kind::minimum, true, {&G::twr}},
      {"tWTR", Kind::minimum, false, {&G::twtr_s, &G::twtr_l}},
      {"tWTR_S", Kind::minimum, true, {&G::twtr_s}},
      {"tWTR_L", Kind::minimum, true, {&G::twtr_l}},
      {"tRTP", Kind::minimum, true, {&G::trtp}},
      {"read-to-write", Kind::minimum, true, {&G::read_to_write}},
      {"write-to-read-extra", Kind::minimum, false, {&G::write_to_read_extra}},
      {"rank-switch", Kind::minimum, false, {&G::rank_switch}},
      {"tREFI", Kind::maximum, true, {&G::trefi}},
      {"tRFC", Kind::minimum, true, {&G::trfc}},
      {"tREFIpb", Kind::maximum, false, {&G::trefi_bank}},
      {"tRFCpb", Kind::minimum, false, {&G::trfc_bank}},
      {"postponable", Kind::count, false, {&G::postponable}},
  };
  return all;
}

const std::map<std::string, double SupplyCurrents::*>& current_names() {
  using C = SupplyCurrents;
  static const std::map<std::string, double C::*> all = {
      {"IDD0", &C::idd0},   {"IDD2N", &C::idd2n}, {"IDD3N", &C::idd3n},
      {"IDD4R", &C::idd4r}, {"IDD4W", &C::idd4w}, {"IDD5B", &C::idd5b},
      {"IPP0", &C::ipp0},   {"IPP3N", &C::ipp3n}, {"IPP5B", &C::ipp5b}};
  return all;
}

std::string all_names() {
  std::string names = "grade, standard, clock, rounding, density, width";
  for (const Parameter& parameter : parameters()) names += std::string(", ") + parameter.name;
  names += ", part, VDD, VPP";
  for (const auto& [name, ignored] : current_names()) names += ", " + name;
  return names;
}

// One line, taken apart.
struct Line {
  int number = 0;
  std::string name;
  std::vector<GradeWord> value;
  bool applies = true;
  std::string source;
  bool read = false;

  std::string written() const {
    std::string text;
    for (const GradeWord& word : value) {
      const bool glued =
          text.empty() || text.back() == '(' || word.text == "," || word.text == ")" || word.text == "(";
      text += (glued ? "" : " ") + word.text;
    }
    return text;
  }
  const std::string& only_word(const char* expected) const {
    if (value.size() != 1 || value[0].quoted) throw LineError(name + ": expected " + expected);
    return value[0].text;
  }
  const std::string& only_text() const {
    if (value.size() != 1 || !value[0].quoted) throw LineError(name + ": expected a text in quotation marks");
    return value[0].text;
  }
};

class GradeReader {
 public:
  GradeReader(const std::string& text, std::string origin, unsigned density_gbit, unsigned device_bits)
      : origin_(std::move(origin)) {
    grade_.density_gbit = density_gbit;
    grade_.device_bits = device_bits;
    grade_.rank_switch = Grade{}.rank_switch;
    std::size_t begin = 0;
    for (int number = 1; begin <= text.size(); ++number) {
      const std::size_t end = std::min(text.find('\n', begin), text.size());
      try {
        read_line(number, text.substr(begin, end - begin));
      } catch (const LineError& error) {
        add(number, error.what());
        faulty_.insert(first_word(text.substr(begin, end - begin)));
      }
      begin = end + 1;
    }
    complete();
  }

  Grade grade() const {
    refuse_problems();
    return grade_;
  }
  GradeRange range() const {
    refuse_problems();
    return {densities_, widths_};
  }

 private:
  void add(int line, const std::string& what) { problems_.emplace_back(line, what); }

  static std::string first_word(const std::string& line) {
    const std::size_t begin = std::min(line.find_first_not_of(" \t"), line.size());
    return line.substr(begin, line.find_first_of(" \t\r", begin) - begin);
  }

  bool is_given(const std::string& name) const {
    if (lines_.count(name) != 0 || faulty_.count(name) != 0) return true;
    // of "tRRD_S": "tRRD"
    return name.size() > 2 && name[name.size() - 2] == '_' &&
           faulty_.count(name.substr(0, name.size() - 2)) != 0;
  }

  void refuse_problems() const {
    if (problems_.empty()) return;
    std::vector<std::pair<int, std::string>> sorted = problems_;
    std::stable_sort(sorted.begin(), sorted.end(),
                     [](const auto& a, const auto& b) { return a.first < b.first; });
    std::string text;
    for (const auto& [line, what] : sorted) {
      text +=
          (text.empty() ? "" : "\n") + origin_ + (line > 0 ? ":" + std::to_string(line) : "") + ": " + what;
    }
    throw GradeError(text);
  }

  void read_line(int number, const std::string& text) {
    std::vector<GradeWord> words = words_of(text);
    if (words.empty()) return;
    Line line;
    line.number = number;
    line.name = words[0].text;
    words.erase(words.begin());
    take_source(words, line);
    take_condition(words, line);
    line.value = std::move(words);
    if (line.value.empty()) throw LineError(line.name + ": the value is missing");
    read_value(line);
  }

  // "source" read|memory
  static void take_source(std::vector<GradeWord>& words, Line& line) {
    if (words.empty() || (words.back().text != "read" && words.back().text != "memory")) {
      if (words.size() >= 2 && words.back().quoted) {
        throw LineError(line.name + ": expected read or memory after the source");
      }
      return;
    }
    line.read = words.back().text == "read";
    words.pop_back();
    if (words.empty() || !words.back().quoted) {
      throw LineError(line.name + ": expected a source in quotation marks before read or memory");
    }
    line.source = words.back().text;
    words.pop_back();
  }

  // when density N... width N..., in any order
  void take_condition(std::vector<GradeWord>& words, Line& line) {
    const auto when =
        std::find_if(words.begin(), words.end(), [](const GradeWord& word) { return word.text == "when"; });
    if (when == words.end()) return;
    for (auto at = when + 1; at != words.end() || at == when + 1;) {
      const std::string what = at == words.end() ? "" : at->text;
      if (what != "density" && what != "width") {
        throw LineError(line.name + ": expected density or width after when, not '" + what + "'");
      }
      const bool density = what == "density";
      const std::vector<unsigned>& known = density ? densities_ : widths_;
      bool holds = false;
      const auto first = ++at;
      for (; at != words.end() && at->text != "density" && at->text != "width"; ++at) {
        const unsigned number = static_cast<unsigned>(whole_number(at->text, most_count));
        if (std::find(known.begin(), known.end(), number) == known.end()) {
          throw LineError(line.name + ": " + what + " " + at->text + " is not among those listed further up");
        }
        holds = holds || number == (density ? grade_.density_gbit : grade_.device_bits);
      }
      if (at == first) throw LineError(line.name + ": expected numbers after " + what);
      line.applies = line.applies && holds;
    }
    words.erase(when, words.end());
  }

  void read_value(const Line& line) {
    if (line.name == "grade") return read_once(line, [&] { grade_.name = line.only_word("a name"); });
    if (line.name == "standard") return read_once(line, [&] { grade_.standard = line.only_text(); });
    if (line.name == "clock") {
      return read_once(line, [&] { grade_.clock = clock_of(line.only_word("a frequency or a period")); });
    }
    if (line.name == "rounding") return read_once(line, [&] { rounding_ = rounding_of(line); });
    if (line.name == "density") {
      return read_once(line, [&] { read_choice(line, densities_, grade_.density_gbit); });
    }
    if (line.name == "width") return read_once(line, [&] { read_choice(line, widths_, grade_.device_bits); });
    if (line.name == "part") return read_once(line, [&] { grade_.currents.part = line.only_text(); });
    if (line.name == "VDD" || line.name == "VPP") {
      unsigned& field = line.name == "VDD" ? grade_.currents.vdd_mv : grade_.currents.vpp_mv;
      return read_once(line, [&] { field = millivolts_of(line.only_word("a voltage")); });
    }
    if (const auto current = current_names().find(line.name); current != current_names().end()) {
      double& field = grade_.currents.*current->second;
      return read_once(line, [&] { field = milliamperes_of(line.only_word("a current")); });
    }
    for (const Parameter& parameter : parameters()) {
      if (line.name == parameter.name) return read_parameter(line, parameter);
    }
    throw LineError("'" + line.name + "' is not known; expected one of " + all_names());
  }

  template <typename Set>
  void read_once(const Line& line, const Set& set) {
    const SupplyCurrents before = grade_.currents;
    if (!line.applies) {  // to find mistakes in it
      set();
      grade_.currents = before;
      return;
    }
    claim(line, line.name);
    set();
    note(line);
  }

  void claim(const Line& line, const std::string& name) {
    const auto [first, fresh] = lines_.emplace(name, line.number);
    if (!fresh) {
      throw LineError(name + " is set again; line " + std::to_string(first->second) +
                      " holds for this device too");
    }
  }

  void note(const Line& line) {
    if (line.name == "grade" || line.name == "part" || line.name == "rounding") return;
    grade_.sources.push_back({line.name, line.written(), line.source, line.read});
  }

  static Rounding rounding_of(const Line& line) {
    const std::string& word = line.only_word("exact, ddr4 or ddr5");
    if (word == "exact") return Rounding::exact;
    if (word == "ddr4") return Rounding::ddr4;
    if (word == "ddr5") return Rounding::ddr5;
    throw LineError("rounding '" + word + "', expected exact, ddr4 or ddr5");
  }

  static void read_choice(const Line& line, std::vector<unsigned>& choices, unsigned& chosen) {
    for (const GradeWord& word : line.value) {
      choices.push_back(static_cast<unsigned>(whole_number(word.text, most_count)));
    }
    if (chosen == 0) chosen = choices[0];
    if (std::find(choices.begin(), choices.end(), chosen) != choices.end()) return;
    throw LineError(line.name + " " + std::to_string(chosen) + " is not covered, expected one of " +
                    line.written());
  }

  void read_parameter(const Line& line, const Parameter& parameter) {
    const unsigned value = value_of(line, parameter);
    if (!line.applies) return;
    // "tRRD" stands for tRRD_S and tRRD_L.
    if (parameter.fields.size() == 2) {
      claim(line, line.name + "_S");
      claim(line, line.name + "_L");
    } else {
      claim(line, line.name);
    }
    for (unsigned Grade::*field : parameter.fields) grade_.*field = value;
    note(line);
  }

  unsigned value_of(const Line& line, const Parameter& parameter) {
    if (parameter.kind == Kind::count) {
      return static_cast<unsigned>(whole_number(line.only_word("one number"), most_count));
    }
    if (lines_.count("clock") == 0) throw LineError(line.name + " needs a clock line further up");
    const auto nested = std::count_if(line.value.begin(), line.value.end(),
                                      [](const GradeWord& word) { return word.text == "("; });
    if (nested > most_nested) throw LineError(line.name + ": more than 8 brackets");
    std::size_t at = 0;
    const std::int64_t value = sum(line, parameter, at);
    if (at != line.value.size()) {
      throw LineError(line.name + ": expected the end of the value, not '" + line.value[at].text + "'");
    }
    if (value < 0 || value > static_cast<std::int64_t>(most_clocks)) {
      throw LineError(line.name + " comes to " + std::to_string(value) + " clocks, expected 0 to " +
                      std::to_string(most_clocks));
    }
    return static_cast<unsigned>(value);
  }

  std::int64_t sum(const Line& line, const Parameter& parameter, std::size_t& at) {
    std::int64_t total = term(line, parameter, at);
    while (at < line.value.size() && (line.value[at].text == "+" || line.value[at].text == "-")) {
      const bool plus = line.value[at++].text == "+";
      const std::int64_t next = term(line, parameter, at);
      total += plus ? next : -next;
    }
    return total;
  }

  std::int64_t term(const Line& line, const Parameter& parameter, std::size_t& at) {
    if (at == line.value.size()) throw LineError(line.name + ": the value ends too early");
    const std::string& word = line.value[at++].text;
    if (word == "max") {
      expect(line, at, "(");
      const std::int64_t one = sum(line, parameter, at);
      expect(line, at, ",");
      const std::int64_t other = sum(line, parameter, at);
      expect(line, at, ")");
      return std::max(one, other);
    }
    if (!word.empty() && word[0] >= '0' && word[0] <= '9') return clocks(word, parameter);
    return named(line, word);
  }

  static void expect(const Line& line, std::size_t& at, const char* text) {
    if (at < line.value.size() && line.value[at].text == text) {
      ++at;
    } else {
      throw LineError(line.name + ": expected '" + text + "'" +
                      (at < line.value.size() ? ", not '" + line.value[at].text + "'" : " at the end"));
    }
  }

  std::int64_t clocks(const std::string& word, const Parameter& parameter) const {
    const Quantity quantity = quantity_of(word);
    Clocks n = 0;
    if (quantity.unit == "nCK") {
      if (quantity.numerator % quantity.denominator != 0)
        throw LineError("'" + word + "', expected whole clocks");
      n = quantity.numerator / quantity.denominator;
    } else {
      const Picoseconds time = time_of(quantity, word);
      n = parameter.kind == Kind::maximum ? clocks_at_most(time, grade_.clock)
                                          : clocks_at_least(time, grade_.clock, rounding_);
    }
    if (n > most_clocks)
      throw LineError("'" + word + "' is more than " + std::to_string(most_clocks) + " clocks");
    return static_cast<std::int64_t>(n);
  }

  std::int64_t named(const Line& line, const std::string& word) const {
    if (word == "BL/2")
      return lines_.count("burst") == 0 && line.applies ? need_above(word) : grade_.burst_clocks();
    for (const Parameter& parameter : parameters()) {
      if (word != parameter.name || parameter.kind == Kind::count) continue;
      const std::string claimed = parameter.fields.size() == 2 ? word + "_S" : word;
      if (lines_.count(claimed) == 0 && line.applies) need_above(word);
      return grade_.*parameter.fields[0];
    }
    throw LineError(line.name + ": '" + word + "' is neither a number with a unit nor the name of a time");
  }

  [[noreturn]] static std::int64_t need_above(const std::string& word) {
    throw LineError(word + " has no value further up");
  }

  // What follows from the rest, and what the file as a whole lacks or contradicts.
  void complete() {
    for (const char* name : {"grade", "standard", "clock", "density", "width"}) {
      if (!is_given(name)) add(0, std::string("needs a line ") + name);
    }
    for (const Parameter& parameter : parameters()) {
      if (parameter.needed && !is_given(parameter.name)) {
        add(0, std::string(parameter.name) + " is missing for density " +
                   std::to_string(grade_.density_gbit) + ", width " + std::to_string(grade_.device_bits));
      }
    }
    if (!problems_.empty()) return;
    if (lines_.count("tRPab") == 0) grade_.trp_all = grade_.trp;
    if (lines_.count("tCCD_L_WR") == 0) grade_.tccd_l_wr = grade_.tccd_l;
    const std::uint64_t bytes = std::uint64_t{grade_.density_gbit} << 27;
    grade_.rows = bytes / (std::uint64_t{grade_.page_bytes} * grade_.banks());
    for (const std::string& problem : grade_.problems()) add(line_of(problem), problem);
  }

  // Grade::problems() begin with the parameter they are about.
  int line_of(const std::string& problem) const {
    const std::string name = problem.substr(0, problem.find(' '));
    const auto line = lines_.find(name);
    return line == lines_.end() ? 0 : line->second;
  }

  std::string origin_;
  Grade grade_;
  Rounding rounding_ = Rounding::exact;
  std::vector<unsigned> densities_, widths_;
  std::map<std::string, int> lines_;  // what is set, and where
  std::set<std::string> faulty_;      // whose line could not be understood
  std::vector<std::pair<int, std::string>> problems_;
};

}  // namespace

Grade parse_grade(const std::string& text, const std::string& origin, unsigned density_gbit,
                  unsigned device_bits) {
  return GradeReader(text, origin, density_gbit, device_bits).grade();
}

GradeRange range_of_grade_text(const std::string& text, const std::string& origin) {
  return GradeReader(text, origin, 0, 0).range();
}

}  // namespace earshot
