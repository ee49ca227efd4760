// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "settings.h"

#include <algorithm>
#include <boost/program_options.hpp>
#include <filesystem>
#include <fstream>
#include <functional>
#include <map>
#include <sstream>

#include "earshot/protocol/nearest.h"
#include "keys.h"
#include "settings_checks.h"
#include "shipped.h"

namespace earshot {
namespace {

namespace po = boost::program_options;

po::options_description described_keys() {
  po::options_description description;
  for (const Key& key : keys()) description.add_options()(key.name, po::value<std::string>());
  return description;
}

std::string trimmed(const std::string& text) {
  const std::size_t first = text.find_first_not_of(" \t\r");
  if (first == std::string::npos) return {};
  return text.substr(first, text.find_last_not_of(" \t\r") - first + 1);
}

// The lines of an INI file on which each full key stands. Boost.Program_options does not tell.
std::map<std::string, std::vector<int>> lines_of_keys(std::istream& file) {
  std::map<std::string, std::vector<int>> lines;
  std::string section, line;
  for (int number = 1; std::getline(file, line); ++number) {
    line = trimmed(line.substr(0, line.find('#')));
    if (line.size() >= 2 && line.front() == '[' && line.back() == ']')
      section = line.substr(1, line.size() - 2) + ".";
    else if (const std::size_t equals = line.find('='); equals != std::string::npos)
      lines[section + trimmed(line.substr(0, equals))].push_back(number);
  }
  return lines;
}

bool is_key(const std::string& name) {
  return std::any_of(keys().begin(), keys().end(), [&](const Key& key) { return key.name == name; });
}

std::string unknown_key(const std::string& where, const std::string& key) {
  std::vector<std::string> names;
  for (const Key& known : keys()) names.push_back(known.name);
  const std::string close = nearest(key, names);
  return where + ": unknown key '" + key + "'" +
         (close.empty() ? "; 'earshot simulate --help' lists the keys" : "; did you mean '" + close + "'?");
}

class Collector {
 public:
  void read_file(const std::string& path);
  void read_arguments(const std::vector<std::string>& arguments);
  void problem(const std::string& text) { problems_.push_back(text); }
  void give_up_if_problems() const;

  GivenKeys given;

 private:
  void take(const po::parsed_options& parsed, bool in_file,
            const std::function<std::string(const std::string& key, std::size_t occurrence)>& where);
  std::vector<std::string> problems_;
};

void Collector::read_file(const std::string& path) {
  std::ifstream file(path);
  std::error_code ignored;
  if (!file || std::filesystem::is_directory(path, ignored))
    throw UsageError(path + ": cannot be read; expected a configuration file");
  const auto lines = lines_of_keys(file);
  file.clear();
  file.seekg(0);
  try {
    take(po::parse_config_file(file, described_keys(), true), true,
         [&](const std::string& key, std::size_t occurrence) {
           const auto found = lines.find(key);
           if (found == lines.end() || occurrence >= found->second.size()) return path;
           return path + ":" + std::to_string(found->second[occurrence]);
         });
  } catch (const po::invalid_config_file_syntax& error) {
    std::ifstream again(path);
    std::string line;
    int number = 1;
    while (std::getline(again, line) && trimmed(line.substr(0, line.find('#'))) != error.tokens()) ++number;
    throw UsageError(path + ":" + std::to_string(number) + ": '" + error.tokens() +
                     "' is neither a [section] nor key = value");
  }
}

void Collector::read_arguments(const std::vector<std::string>& arguments) {
  // "--key=" empties a key; Boost.Program_options would refuse it.
  std::vector<std::string> with_values, emptied;
  for (const std::string& argument : arguments) {
    const bool empties = argument.rfind("--", 0) == 0 && argument.find('=') == argument.size() - 1;
    if (empties)
      emptied.push_back(argument.substr(2, argument.size() - 3));
    else
      with_values.push_back(argument);
  }
  const po::options_description description = described_keys();
  try {
    const int style = po::command_line_style::allow_long | po::command_line_style::long_allow_adjacent |
                      po::command_line_style::long_allow_next;
    po::parsed_options parsed =
        po::command_line_parser(with_values).options(description).style(style).allow_unregistered().run();
    for (const std::string& key : emptied) parsed.options.emplace_back(key, std::vector<std::string>{""});
    for (const std::string& stray : po::collect_unrecognized(parsed.options, po::include_positional))
      if (stray.rfind("--", 0) != 0) problem("command line: '" + stray + "' is not a --key=value");
    take(parsed, false, [](const std::string&, std::size_t) { return std::string("command line"); });
  } catch (const po::error& error) {
    throw UsageError(std::string("command line: ") + error.what());
  }
}

void Collector::take(const po::parsed_options& parsed, bool in_file,
                     const std::function<std::string(const std::string&, std::size_t)>& where) {
  std::map<std::string, std::size_t> occurrences;
  for (const po::option& option : parsed.options) {
    if (option.position_key >= 0 || option.string_key.empty()) continue;
    const std::size_t occurrence = occurrences[option.string_key]++;
    const std::string place = where(option.string_key, occurrence);
    if (option.unregistered || !is_key(option.string_key))
      problem(unknown_key(place, option.string_key));
    else if (occurrence > 0)
      problem(place + ": key '" + option.string_key + "' is given twice, first at " + where(option.string_key, 0) +
              "; keep one");
    else
      given[option.string_key] = {option.value.empty() ? "" : trimmed(option.value.front()), place, in_file};
  }
}

void Collector::give_up_if_problems() const {
  if (problems_.empty()) return;
  std::string text;
  for (const std::string& problem : problems_) text += (text.empty() ? "" : "\n") + problem;
  throw UsageError(text);
}

}  // namespace

Settings read_settings(const std::string& config, const std::vector<std::string>& arguments) {
  Collector collector;
  const std::string config_path = config.empty() ? config : configuration_path(config);
  if (!config_path.empty()) collector.read_file(config_path);
  collector.read_arguments(arguments);

  Settings settings;
  for (const Key& key : keys()) {
    const auto found = collector.given.find(key.name);
    const std::string text = found == collector.given.end() ? key.default_text : found->second.text;
    const std::string expected = key.apply(text, settings);
    settings.resolved.emplace_back(key.name, text);
    if (expected.empty()) continue;
    collector.problem((found == collector.given.end() ? "default" : found->second.where) + ": " + key.name + " = '" +
                      text + "'; expected " + expected);
  }
  collector.give_up_if_problems();

  // A file names its recording and its table from where it stands.
  const auto beside_file = [&](const char* key, std::string& path, bool only_if_there) {
    const auto found = collector.given.find(key);
    if (found == collector.given.end() || !found->second.in_file || path.empty()) return;
    const auto beside = std::filesystem::path(config_path).parent_path() / path;
    std::error_code ignored;
    if (!only_if_there || std::filesystem::exists(beside, ignored)) path = beside.string();
  };
  beside_file("workload.recording", settings.recording, false);
  const auto is_builtin = [](const std::vector<std::string>& names, const std::string& name) {
    return std::find(names.begin(), names.end(), name) != names.end();
  };
  if (!is_builtin(builtin_tables(), settings.protocol)) beside_file("caches.protocol", settings.protocol, true);
  if (!is_builtin(builtin_grades(), settings.grade)) beside_file("memory.grade", settings.grade, true);

  settings.pattern.initiators = settings.caches;
  settings.pattern.line_bytes = settings.geometry.line_bytes;
  for (const std::string& what : complete(settings, collector.given)) collector.problem(what);
  collector.give_up_if_problems();
  return settings;
}

std::string settings_help() {
  std::ostringstream out;
  std::string section;
  for (const Key& key : keys()) {
    const std::string name = key.name;
    const std::size_t dot = name.find('.');
    const std::string its_section = dot == std::string::npos ? "" : name.substr(0, dot);
    if (!section.empty() && its_section != section) out << "\n";
    section = its_section;
    out << "  " << name << std::string(name.size() < 24 ? 24 - name.size() : 1, ' ') << key.help << "\n";
    if (*key.default_text != '\0') out << std::string(26, ' ') << "default: " << key.default_text << "\n";
  }
  return out.str();
}

}  // namespace earshot
