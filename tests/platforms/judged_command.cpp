// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "judged_command.h"

#include <wordexp.h>

#include <algorithm>
#include <map>
#include <utility>

#include "command_runner.h"
#include "dram/command_checker.h"
#include "settings.h"

namespace command_tests {
namespace {

using namespace earshot;

// Empty if the shell would do more than split them.
std::vector<std::string> words_of(const std::string& arguments) {
  wordexp_t found{};
  std::vector<std::string> words;
  if (wordexp(arguments.c_str(), &found, WRDE_NOCMD) != 0) return words;
  for (std::size_t i = 0; i < found.we_wordc; ++i) words.emplace_back(found.we_wordv[i]);
  wordfree(&found);
  return words;
}

// The file that a run writes its log to: the same for all runs of a test, as its name is in their documents.
std::string own_log() {
  static const Folder folder;
  return folder / "commands.csv";
}

DramCommand command_named(const std::string& name) {
  for (int i = 0; i <= static_cast<int>(DramCommand::refresh_bank); ++i)
    if (name == name_of(static_cast<DramCommand>(i))) return static_cast<DramCommand>(i);
  FAIL("no DRAM command: " << name);
  return {};
}

std::vector<std::string> fields_of(const std::string& line) {
  std::vector<std::string> fields(1);
  for (const char c : line)
    if (c == ',')
      fields.emplace_back();
    else
      fields.back() += c;
  return fields;
}

std::uint64_t number(const std::string& field) { return field.empty() ? 0 : std::stoull(field); }

// What is wrong in a command log file's text; fails the test if it is not as platforms/command_log.h says. Every DRAM is
// built to `config`; the log covers the time up to `end`, or to its last command, if that is later.
std::vector<Broken> broken_in_log(const std::string& text, const DramConfig& config, Picoseconds end = 0) {
  std::map<std::string, std::vector<std::vector<CommandRecord>>> windows;  // of each, a log a channel
  std::istringstream lines(text);
  std::string line;
  std::getline(lines, line);
  REQUIRE(line == "window,channel,clock,time-ps,command,rank,bank-group,bank,row,column");
  while (std::getline(lines, line)) {
    const std::vector<std::string> field = fields_of(line);
    if (field.size() != 10) FAIL("not ten fields: " << line);
    CommandRecord command;
    command.channel = static_cast<unsigned>(number(field[1]));
    command.clock = number(field[2]);
    command.command = command_named(field[4]);
    command.rank = static_cast<unsigned>(number(field[5]));
    command.bank_group = static_cast<unsigned>(number(field[6]));
    command.bank = static_cast<unsigned>(number(field[7]));
    command.row = number(field[8]);
    command.column = number(field[9]);
    if (number(field[3]) != config.grade.clock.edge(command.clock)) FAIL("not the time of the clock: " << line);
    auto& channels = windows[field[0]];
    channels.resize(config.channels);
    if (command.channel >= config.channels) FAIL("no such channel: " << line);
    channels[command.channel].push_back(command);
  }
  std::vector<Broken> all;
  for (const auto& [window, channels] : windows)
    for (const std::vector<CommandRecord>& log : channels) {
      const Clocks last = log.empty() ? 0 : log.back().clock;
      LogRules rules{config.ranks, config.refresh, std::max(last, config.grade.clock.edge_at_or_after(end))};
      for (Broken& broken : broken_rules(log, config.grade, rules)) all.push_back(std::move(broken));
    }
  return all;
}

}  // namespace

struct JudgedCommand::Run {
  std::string log, json;
  bool names_log;
  DramConfig config;
};

JudgedCommand::JudgedCommand(const std::string& arguments) : arguments_(arguments) {
  const std::vector<std::string> words = words_of(arguments);
  if (words.empty() || words.front() != "simulate") return;
  std::string config, json;
  std::vector<std::string> keys;
  for (std::size_t i = 1; i < words.size(); ++i) {
    if (words[i] == "--json" && i + 1 < words.size())
      json = words[++i];
    else if (words[i].rfind("--", 0) != 0 && config.empty() && keys.empty())
      config = words[i];
    else if (words[i] != "--quiet")
      keys.push_back(words[i]);
  }
  try {
    const Settings settings = read_settings(config, keys);
    if (settings.timing != BusTiming::arbitrated || settings.memory_kind != MemoryKind::dram) return;
    const bool names_log = !settings.command_log.empty();
    run_ = std::make_shared<Run>(
        Run{names_log ? settings.command_log : own_log(), json, names_log, settings.dram});
  } catch (const std::exception&) {  // the command refuses them, too
  }
}

std::string JudgedCommand::arguments() const {
  return run_ && !run_->names_log ? arguments_ + " --memory.command-log=" + run_->log : arguments_;
}

void JudgedCommand::judge(int status) const {
  if (!run_ || status == 2) return;  // 2: unusable input
  const std::string text = file_text(run_->log);
  INFO(arguments_ << "\nDRAM commands: " << std::count(text.begin(), text.end(), '\n') - 1);
  REQUIRE(!text.empty());
  Picoseconds end = 0;
  if (!run_->json.empty() && status == 0)
    end = static_cast<Picoseconds>(1000 * Json::parse(file_text(run_->json))["elapsed-ns"].get<double>());
  std::string first;
  const std::vector<Broken> broken = broken_in_log(text, run_->config, end);
  for (std::size_t i = 0; i < std::min<std::size_t>(broken.size(), 10); ++i) first += broken[i].text + "\n";
  INFO(broken.size() << " times a rule is broken:\n" << first);
  REQUIRE(broken.empty());
  if (!run_->names_log) fs::remove(run_->log);
}

}  // namespace command_tests

using namespace command_tests;

TEST_CASE("what is wrong in a command log is found in its file", "[command]") {
  const Folder folder;
  const std::string path = folder / "log.csv";
  const std::vector<std::string> keys{"--timing=arbitrated",         "--memory.kind=dram",
                                      "--workload.pattern=uniform",  "--workload.order=concurrent",
                                      "--workload.accesses=4000",    "--workload.lines=4096",
                                      "--caches.size=1KiB",          "--baseline=off",
                                      "--memory.command-log=" + path};
  std::string run = "simulate --quiet";
  for (const std::string& key : keys) run += " " + key;
  REQUIRE(command_tests::earshot(run).status == 0);
  const std::string text = file_text(path);
  const auto config = read_settings("", keys).dram;
  const auto found = [&](const std::string& what, const std::string& instead) {
    const std::string changed = std::regex_replace(text, std::regex(what), instead);
    REQUIRE(changed != text);
    std::string rules;
    for (const auto& broken : broken_in_log(changed, config)) rules += broken.rule + ", ";
    return rules;
  };
  CHECK(broken_in_log(text, config).empty());
  CHECK_THAT(found(",RD,0,([0-9],[0-9]),[0-9]+,", ",RD,0,$1,7777,"), Catch::Contains("open row"));
  CHECK_THAT(found("\nmemory,[0-9,]+,REF,0,,,,", ""), Catch::Contains("postponed"));
  CHECK_THAT(found("\nmemory,[0-9,]+,ACT,[0-9,]+", ""), Catch::Contains("open row"));
  CHECK_THAT(found(",RD,0,[0-9],[0-9],", ",RD,0,0,0,"), Catch::Contains("tCCD_L"));
}
