// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <cstdio>

#include "earshot/timing/latency.h"
#include "report.h"
#include "simulate.h"
#include "verbs.h"
#include "whole_file.h"

namespace earshot {
namespace {

constexpr const char* help =
    "earshot simulate CONFIG [--section.key=value ...] [--json FILE] [--quiet]\n"
    "\n"
    "Plays the workload that CONFIG names through its caches, bus and memory, and prints\n"
    "what it cost. Keys given here win over those in CONFIG.\n"
    "\n"
    "  --json FILE   also write the whole result to FILE\n"
    "  --quiet       no text answer, no progress\n"
    "\n"
    "Keys, in an INI file as 'key = value' under [section]:\n\n";

}  // namespace

int simulate_verb(const std::vector<std::string>& words) {
  std::string config, json_path;
  bool quiet = false;
  bool value_expected = false;  // "--key value"
  std::vector<std::string> keys;
  for (std::size_t i = 0; i < words.size(); ++i) {
    const std::string& word = words[i];
    if (value_expected) {
      keys.push_back(word);
      value_expected = false;
      continue;
    }
    if (word == "--help") {
      std::fputs((help + settings_help()).c_str(), stdout);
      return 0;
    }
    if (word == "--quiet") {
      quiet = true;
    } else if (word == "--json" && i + 1 < words.size()) {
      json_path = words[++i];
    } else if (word.rfind("--json=", 0) == 0) {
      json_path = word.substr(7);
    } else if (word == "--json") {
      throw UsageError("command line: --json needs the name of a file");
    } else if (word.rfind("--", 0) != 0 && config.empty()) {
      config = word;
    } else {
      keys.push_back(word);
      value_expected = word.rfind("--", 0) == 0 && word.find('=') == std::string::npos;
    }
  }
  if (config.empty() && keys.empty())
    throw UsageError("simulate: no configuration; expected the path of an INI file");
  const Settings settings = read_settings(config, keys);
  if (!json_path.empty()) check_writable(json_path);

  const Json results = simulate(settings, !quiet);
  if (!json_path.empty()) write_whole_file(json_path, json_text(results));
  if (!quiet) std::fputs(text_answer(results).c_str(), stdout);
  std::fflush(stdout);  // the answer before the findings
  std::string found;
  for (const Json& finding : results.at("findings"))
    found += (found.empty() ? "" : "\n") + finding.get<std::string>();
  if (!found.empty()) throw Finding(found);
  return 0;
}

}  // namespace earshot
