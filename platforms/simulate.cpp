// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "simulate.h"

#include <sys/prctl.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <cerrno>
#include <chrono>
#include <csignal>
#include <cstdio>

#include "command_log.h"
#include "earshot/protocol/prover.h"
#include "platform.h"
#include "results.h"
#include "whole_file.h"

namespace earshot {
namespace {

constexpr const char* baseline_protocol = "write-through-update";
const std::string in_baseline = "in the baseline run: ";

// A built-in table is proved by the tests; a user's own is proved here before it may run.
void require_soundness(const Settings& settings) {
  const std::vector<std::string>& built_in = builtin_tables();
  if (std::find(built_in.begin(), built_in.end(), settings.protocol) != built_in.end()) return;
  for (const int caches : {2, 3}) {
    const Proof proof = prove(*settings.table, caches);
    if (!proof.sound)
      throw UsageError(settings.protocol + ": the protocol is not sound, so it is not run\n" +
                       describe(*settings.table, proof));
  }
}

// Counts accesses and says so on a terminal once a second, from the second second on.
class Progress {
 public:
  explicit Progress(bool wanted) : shows_(wanted && isatty(STDERR_FILENO) != 0) {}
  ~Progress() {
    if (shown_) std::fputs("\r\033[K", stderr);
  }
  void step() {
    if ((++done_ & 0xfff) != 0 || !shows_) return;
    const auto now = Clock::now();
    if (now - last_ < std::chrono::seconds(1)) return;
    last_ = now;
    shown_ = true;
    std::fprintf(stderr, "\r%llu accesses", static_cast<unsigned long long>(done_));
    std::fflush(stderr);
  }

 private:
  using Clock = std::chrono::steady_clock;
  bool shows_;
  bool shown_ = false;
  std::uint64_t done_ = 0;
  Clock::time_point last_ = Clock::now();
};

Json run(const Settings& settings, bool progress) {
  Progress steps(progress);
  PlayerHooks hooks;
  if (progress) hooks.done = [&steps] { steps.step(); };
  hooks.failed = [] { sc_core::sc_stop(); };

  tlm::tlm_global_quantum::instance().set(from_ps(settings.quantum));
  sc_core::sc_report_handler::set_actions("/OSCI/SystemC", sc_core::SC_INFO, sc_core::SC_DO_NOTHING);
  sc_core::sc_set_stop_mode(sc_core::SC_STOP_IMMEDIATE);
  Platform platform(settings, settings.table, hooks);
  const auto keep_log = [&] {
    if (!settings.command_log.empty()) write_whole_file(settings.command_log, command_log(platform));
  };
  Played played;
  try {
    played = play(settings, platform);
  } catch (const Finding&) {  // it may show why
    keep_log();
    throw;
  }
  keep_log();
  return collect_results(settings, *settings.table, platform, played);
}

// A finding of the baseline run, for the document its process sends.
constexpr const char* finding_field = "finding";

// The same input under the baseline protocol, in a process of its own: a SystemC kernel simulates once.
class BaselineRun {
 public:
  explicit BaselineRun(Settings settings) {
    int ends[2];
    std::fflush(nullptr);
    if (pipe(ends) != 0) throw std::runtime_error("cannot create a pipe for the baseline run");
    const pid_t parent = getpid();
    child_ = fork();
    if (child_ < 0) throw std::runtime_error("cannot start a process for the baseline run");
    if (child_ > 0) {
      close(ends[1]);
      from_ = ends[0];
      return;
    }
    prctl(PR_SET_PDEATHSIG, SIGKILL);  // a killed command leaves nothing running
    if (getppid() != parent) _exit(0);
    close(ends[0]);
    settings.protocol = baseline_protocol;
    settings.update_limit = 0;
    settings.table = std::make_shared<const Table>(load_table(baseline_protocol));
    settings.monitor = Watch::never;
    settings.command_log.clear();
    settings.dram.log_commands = false;
    settings.longest_wait = 0;
    std::string text;
    try {
      text = run(settings, false).dump(-1, ' ', false, Json::error_handler_t::replace);
    } catch (const Finding& finding) {
      text = Json{{finding_field, finding.what()}}.dump(-1, ' ', false, Json::error_handler_t::replace);
    } catch (const std::exception& error) {
      text = Json{{"error", error.what()}}.dump(-1, ' ', false, Json::error_handler_t::replace);
    }
    for (std::size_t sent = 0; sent < text.size();) {
      const ssize_t n = write(ends[1], text.data() + sent, text.size() - sent);
      if (n <= 0) break;
      sent += static_cast<std::size_t>(n);
    }
    _exit(0);
  }
  ~BaselineRun() {
    close(from_);
    if (!finished_) kill(child_, SIGKILL);
    waitpid(child_, nullptr, 0);
  }
  BaselineRun(const BaselineRun&) = delete;
  BaselineRun& operator=(const BaselineRun&) = delete;

  Json results() {
    std::string text;
    char buffer[65536];
    for (ssize_t n; (n = read(from_, buffer, sizeof buffer)) > 0 || (n < 0 && errno == EINTR);)
      if (n > 0) text.append(buffer, static_cast<std::size_t>(n));
    finished_ = true;
    Json results = Json::parse(text, nullptr, false);
    if (results.is_discarded()) throw std::runtime_error("the baseline run ended without a result");
    if (results.contains(finding_field))
      throw Finding(in_baseline + results[finding_field].get<std::string>());
    if (results.contains("error"))
      throw UsageError(in_baseline + results["error"].get<std::string>() +
                       "\n(baseline = off leaves it out)");
    return results;
  }

 private:
  pid_t child_ = -1;
  int from_ = -1;
  bool finished_ = false;  // all it had to say has been read
};

// What the comparison needs of the baseline's document.
Json baseline_summary(const Json& results) {
  Json summary;
  summary["protocol"] = baseline_protocol;
  for (const char* part : {"elapsed-ns", "bus", "memory", "latency"}) summary[part] = results.at(part);
  return summary;
}

}  // namespace

Json simulate(const Settings& settings, bool progress) {
  require_soundness(settings);
  if (!settings.command_log.empty()) check_writable(settings.command_log);
  if (!settings.baseline) return run(settings, progress);
  if (settings.protocol == baseline_protocol) {
    Json results = run(settings, progress);
    results["baseline"] = baseline_summary(results);
    return results;
  }
  BaselineRun baseline(settings);
  Json results = run(settings, progress);
  const Json other = baseline.results();
  results["baseline"] = baseline_summary(other);
  for (const Json& finding : other.at("findings"))
    results["findings"].push_back(in_baseline + finding.get<std::string>());
  return results;
}

}  // namespace earshot
