// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <boost/program_options.hpp>
#include <cstdio>
#include <sstream>

#include "earshot/traffic/recorder/record.h"
#include "quantities.h"
#include "settings.h"
#include "verbs.h"
#include "whole_file.h"

namespace earshot {
namespace {

namespace po = boost::program_options;

constexpr const char* help =
    "earshot record --into FILE [options] -- PROGRAM ARGS\n"
    "\n"
    "Runs a program and records its memory accesses. The program must have been compiled\n"
    "with -fsanitize=thread and linked with Earshot's recorder instead of the sanitizer's\n"
    "library: in CMake, earshot_recordable(TARGET); elsewhere, pkg-config earshot-recorder.\n"
    "\n";

po::options_description options() {
  po::options_description description("Options", 88, 60);
  description.add_options()
      ("into", po::value<std::string>()->value_name("FILE"), "the recording: NAME.csv is text, anything else binary; "
       ".gz or .zst compresses")
      ("seed", po::value<std::string>()->value_name("N")->default_value("1"), "decides which thread runs when")
      ("hand-over", po::value<std::string>()->value_name("N")->default_value("16"),
       "mean accesses before another thread's turn")
      ("limit", po::value<std::string>()->value_name("N")->default_value("0"),
       "accesses after which the program runs on unrecorded; 0: no limit")
      ("free-running", "threads run as they would: approximate order, no values")
      ("help", "this text");
  return description;
}

std::uint64_t number(const po::variables_map& given, const char* name, std::uint64_t least, std::uint64_t most) {
  const std::string text = given[name].as<std::string>();
  std::uint64_t value = 0;
  if (!parse_number(text, value) || value < least || value > most)
    throw UsageError(std::string("record: --") + name + " '" + text + "'; expected a whole number from " +
                     std::to_string(least) + " to " + std::to_string(most));
  return value;
}

}  // namespace

int record_verb(const std::vector<std::string>& words) {
  const auto dashes = std::find(words.begin(), words.end(), "--");
  const std::vector<std::string> ours(words.begin(), dashes);
  po::variables_map given;
  try {
    const int style = po::command_line_style::unix_style & ~po::command_line_style::allow_guessing;
    po::store(po::command_line_parser(ours).options(options()).style(style).positional({}).run(), given);
  } catch (const po::error& error) {
    throw UsageError(std::string("record: ") + error.what() + "; 'earshot record --help' lists the options");
  }
  if (given.count("help") != 0) {
    std::ostringstream out;
    out << help << options();
    std::fputs(out.str().c_str(), stdout);
    return 0;
  }
  if (given.count("into") == 0) throw UsageError("record: no recording is named; expected --into FILE");
  if (dashes == words.end() || dashes + 1 == words.end())
    throw UsageError("record: no program is named; expected -- PROGRAM ARGS");

  RecordOptions record;
  record.into = given["into"].as<std::string>();
  record.program.assign(dashes + 1, words.end());
  record.seed = number(given, "seed", 0, ~std::uint64_t{0});
  record.hand_over = static_cast<std::uint32_t>(number(given, "hand-over", 1, 1000000));
  record.limit = number(given, "limit", 0, ~std::uint64_t{0});
  record.free_running = given.count("free-running") != 0;
  check_writable(record.into);

  const RecordResult result = record_program(record);
  std::fputs(summary_of(record, result).c_str(), stderr);
  return exit_status_of(result);
}

}  // namespace earshot
