// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "settings_checks.h"

#include <algorithm>
#include <array>
#include <filesystem>
#include <sstream>

#include "earshot/dram/grade_file.h"
#include "earshot/traffic/recording.h"
#include "keys.h"

namespace earshot {
namespace {

class Checks {
 public:
  Checks(Settings& settings, const GivenKeys& given) : settings_(settings), given_(given) {}

  void needs();
  void protocol();
  void caches();
  void windows();
  void arbiter();
  void plain_memory();
  void dram();
  void workload();

  std::vector<std::string> take() { return std::move(problems_); }

 private:
  bool is_given(const std::string& key) const { return given_.find(key) != given_.end(); }
  // Given, and not what it is anyway.
  bool is_changed(const Key& key) const {
    return is_given(key.name) && given_.at(key.name).text != key.default_text;
  }
  std::string where(const std::string& key) const {
    const auto found = given_.find(key);
    return (found == given_.end() ? std::string("default") : found->second.where) + ": ";
  }
  const std::string& text_of(const std::string& key) const {
    return std::find_if(settings_.resolved.begin(), settings_.resolved.end(),
                        [&](const auto& one) { return one.first == key; })
        ->second;
  }
  void problem(const std::string& key, const std::string& what) {
    problems_.push_back(where(key) + key + what);
  }
  // A problem of a part of the models, which begins with the part's name for what the key sets.
  void renamed(const std::string& text, const std::vector<std::pair<const char*, const char*>>& keys,
               const char* otherwise);
  bool grade();
  void capacity();

  Settings& settings_;
  const GivenKeys& given_;
  std::vector<std::string> problems_;
};

void Checks::renamed(const std::string& text, const std::vector<std::pair<const char*, const char*>>& keys,
                     const char* otherwise) {
  for (const auto& [name, key] : keys)
    if (text.rfind(name, 0) == 0) {
      const std::size_t at = text.find_first_not_of(": ", std::string(name).size());
      problem(key, ": " + text.substr(at));
      return;
    }
  problem(otherwise, ": " + text);
}

// A key that would silently be without effect is an error, unless it is left at its default.
void Checks::needs() {
  for (const Key& key : keys()) {
    if (!is_changed(key)) continue;
    for (const Need& need : key.needs) {
      const std::string& text = text_of(need.key);
      if (std::find(need.values.begin(), need.values.end(), text) != need.values.end()) continue;
      std::string values;
      for (const char* value : need.values) values += (values.empty() ? "" : " or ") + std::string(value);
      const std::string left =
          *key.default_text == '\0' ? "leave the key out" : std::string("leave it at ") + key.default_text;
      problem(key.name, " = " + text_of(key.name) + ": only with " + need.key + " = " + values +
                            "; set that, or " + left);
    }
  }
}

void Checks::protocol() {
  try {
    settings_.table = std::make_shared<const Table>(load_table(settings_.protocol, settings_.update_limit));
  } catch (const TableError& error) {
    problem("caches.protocol", std::string(": ") + error.what());
  }
  if (settings_.table != nullptr && settings_.update_limit != 0 && !settings_.table->counts())
    problem("caches.update-limit", " = " + std::to_string(settings_.update_limit) + ": protocol '" +
                                       settings_.table->name() +
                                       "' does not count updates; leave the key out");
}

void Checks::caches() {
  for (const std::string& misshapen : settings_.geometry.problems())  // each begins with the key's name
    problem("caches." + misshapen.substr(0, misshapen.find(':')), misshapen.substr(misshapen.find(':')));
  const unsigned line = settings_.geometry.line_bytes;
  if (settings_.bus_width > line)
    problem("bus.width", ": " + std::to_string(settings_.bus_width) + " bytes do not divide a line of " +
                             std::to_string(line) + "; expected at most caches.line");
}

void Checks::windows() {
  for (const std::string& what : AddressMap(settings_.windows).problems(settings_.geometry.line_bytes))
    problem("bus.windows", ": " + what);
}

void Checks::arbiter() {
  for (const std::string& what : settings_.arbiter.problems(static_cast<int>(settings_.caches)))
    renamed(what,
            {{"priorities", "bus.priorities"},
             {"weights", "bus.weights"},
             {"slots", "bus.slots"},
             {"slot cycles", "bus.slot-cycles"}},
            "bus.arbitration");
}

// Its keys also describe what stands behind uncached windows.
void Checks::plain_memory() {
  const bool in_use = settings_.memory_kind == MemoryKind::plain ||
                      std::any_of(settings_.windows.begin(), settings_.windows.end(),
                                  [](const Window& window) { return !window.cached; });
  const auto describes = [](const std::string& key) {
    return key == "memory.read-latency" || key == "memory.write-latency" || key.rfind("memory.beat", 0) == 0;
  };
  for (const Key& key : keys())
    if (!in_use && describes(key.name) && is_changed(key))
      problem(key.name, ": only with memory.kind = plain or an uncached window; leave the key out");
  if (in_use && settings_.beat_bytes > settings_.geometry.line_bytes)
    problem("memory.beat", ": " + std::to_string(settings_.beat_bytes) + " bytes do not divide a line of " +
                               std::to_string(settings_.geometry.line_bytes) +
                               "; expected at most caches.line");
}

bool Checks::grade() {
  const std::string name = settings_.grade;
  try {
    const GradeRange range = grade_range(name);
    const auto covered = [&](const char* key, unsigned wanted, const std::vector<unsigned>& values) {
      if (wanted == 0 || std::find(values.begin(), values.end(), wanted) != values.end()) return true;
      std::string known;
      for (const unsigned value : values) known += (known.empty() ? "" : ", ") + std::to_string(value);
      problem(key,
              " = " + std::to_string(wanted) + ": " + name + " does not cover it; expected one of " + known);
      return false;
    };
    const bool density = covered("memory.density", settings_.density, range.density_gbit);
    const bool width = covered("memory.device-width", settings_.device_width, range.device_bits);
    if (!density || !width) return false;
    settings_.dram.grade = load_grade(name, settings_.density, settings_.device_width);
    return true;
  } catch (const GradeError& error) {
    std::istringstream lines(error.what());
    for (std::string line; std::getline(lines, line);) problem("memory.grade", ": " + line);
    return false;
  }
}

// The cached windows against what the DRAM behind each holds; a window nobody gave becomes that.
void Checks::capacity() {
  const std::uint64_t bytes = settings_.dram.bytes();
  std::ostringstream last;
  last << "0x" << std::hex << bytes - 1;
  if (!is_given("bus.windows")) {
    settings_.windows = {{"memory", 0, bytes, true, 0}};
    for (auto& [key, text] : settings_.resolved)
      if (key == "bus.windows") text = "memory 0x0.." + last.str() + " cached";
    return;
  }
  for (Window& window : settings_.windows) {
    if (!window.cached) continue;
    window.target_base = 0;
    if (window.size == 0 || window.size > bytes)
      problem("bus.windows", ": window '" + window.name +
                                 "' is larger than the DRAM behind it, which holds " + std::to_string(bytes) +
                                 " bytes; expected at most its first address + " + last.str());
  }
}

void Checks::dram() {
  if (settings_.memory_kind != MemoryKind::dram || !grade()) return;
  settings_.dram.log_commands = !settings_.command_log.empty();
  settings_.dram.pace =
      settings_.timing == BusTiming::arbitrated ? DramPace::event_driven : DramPace::annotated;
  const std::vector<std::string> found = settings_.dram.problems();
  const bool only_low = is_given("memory.write-low") && !is_given("memory.write-high");
  for (const std::string& what : found)
    renamed(what,
            {{"channels", "memory.channels"},
             {"ranks", "memory.ranks"},
             {"channel width", "memory.channel-width"},
             {"read queue", "memory.read-queue"},
             {"write queue", "memory.write-queue"},
             {"write marks", only_low ? "memory.write-low" : "memory.write-high"},
             {"age cap", "memory.age-cap"},
             {"refresh", "memory.refresh"},
             {"address map", "memory.address-map"},
             {"bank hashing", "memory.bank-hash"}},
            "memory.grade");
  if (found.empty()) capacity();
}

// What is wrong with a recording as far as its beginning tells; empty if nothing is.
std::string problem_with_recording(const std::string& path) {
  std::error_code ignored;
  if (std::filesystem::exists(path, ignored) && !std::filesystem::is_regular_file(path, ignored))
    return path + ": is no regular file, and a recording is read more than once";
  try {
    open_recording(path);
    return {};
  } catch (const RecordingError& error) {
    return error.what();
  }
}

void Checks::workload() {
  if (settings_.recording.empty() && !settings_.uses_pattern)
    problems_.push_back("configuration: nothing to play; give workload.recording or workload.pattern");
  if (!settings_.recording.empty() && settings_.uses_pattern)
    problem("workload.pattern",
            ": a recording is given too; keep one of workload.recording, workload.pattern");
  if (settings_.packed && settings_.uses_pattern)
    problem("workload.addresses",
            " = packed: a pattern's addresses are packed as they are; leave it at recorded");
  if (!settings_.recording.empty())
    if (const std::string what = problem_with_recording(settings_.recording); !what.empty())
      problem("workload.recording", ": " + what);
  if (!settings_.uses_pattern || !settings_.geometry.problems().empty()) return;
  try {
    make_pattern(settings_.pattern);
  } catch (const PatternError& error) {
    std::istringstream lines(error.what());
    for (std::string line; std::getline(lines, line);) problem("workload.pattern", ": " + line);
  }
}

}  // namespace

std::vector<std::string> complete(Settings& settings, const GivenKeys& given) {
  Checks checks(settings, given);
  checks.needs();
  checks.protocol();
  checks.caches();
  checks.arbiter();
  checks.plain_memory();
  checks.dram();
  checks.windows();
  checks.workload();
  return checks.take();
}

}  // namespace earshot
