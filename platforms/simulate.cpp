// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "simulate.h"

#include <sys/wait.h>
#include <unistd.h>

#include <chrono>
#include <cstdio>
#include <filesystem>

#include "earshot/protocol/prover.h"
#include "platform.h"
#include "results.h"

namespace earshot {
namespace {

constexpr const char* baseline_protocol = "write-through-update";

std::shared_ptr<const Table> sound_table(const Settings& settings) {
  try {
    auto table = std::make_shared<const Table>(load_table(settings.protocol, settings.update_limit));
    if (settings.update_limit != 0 && !table->counts())
      throw UsageError("caches.update-limit = " + std::to_string(settings.update_limit) + ": protocol '" +
                       table->name() + "' does not count updates; leave the key out");
    const std::vector<std::string>& known = builtin_tables();
    if (std::find(known.begin(), known.end(), settings.protocol) != known.end()) return table;
    for (const int caches : {2, 3}) {
      const Proof proof = prove(*table, caches);
      if (!proof.sound)
        throw UsageError(settings.protocol + ": the protocol is not sound, so it is not run\n" +
                         describe(*table, proof));
    }
    return table;
  } catch (const TableError& error) {
    throw UsageError(error.what());
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
  const std::shared_ptr<const Table> table = sound_table(settings);
  Progress steps(progress);
  PlayerHooks hooks;
  if (progress) hooks.done = [&steps] { steps.step(); };
  hooks.failed = [] { sc_core::sc_stop(); };

  tlm::tlm_global_quantum::instance().set(from_ps(settings.quantum));
  sc_core::sc_report_handler::set_actions("/OSCI/SystemC", sc_core::SC_INFO, sc_core::SC_DO_NOTHING);
  sc_core::sc_set_stop_mode(sc_core::SC_STOP_IMMEDIATE);
  Platform platform(settings, table, hooks);
  sc_core::sc_start();
  return collect_results(settings, *table, platform);
}

// The same input under the baseline protocol, in a process of its own: a SystemC kernel simulates once.
class BaselineRun {
 public:
  explicit BaselineRun(Settings settings) {
    int ends[2];
    std::fflush(nullptr);
    if (pipe(ends) != 0) throw std::runtime_error("cannot create a pipe for the baseline run");
    child_ = fork();
    if (child_ < 0) throw std::runtime_error("cannot start a process for the baseline run");
    if (child_ > 0) {
      close(ends[1]);
      from_ = ends[0];
      return;
    }
    close(ends[0]);
    settings.protocol = baseline_protocol;
    settings.update_limit = 0;
    settings.monitor = Watch::never;
    std::string text;
    try {
      text = run(settings, false).dump();
    } catch (const std::exception& error) {
      text = Json{{"error", error.what()}}.dump();
    }
    for (std::size_t sent = 0; sent < text.size();) {
      const ssize_t n = write(ends[1], text.data() + sent, text.size() - sent);
      if (n <= 0) break;
      sent += static_cast<std::size_t>(n);
    }
    _exit(0);
  }
  ~BaselineRun() {
    if (from_ >= 0) close(from_);
    if (child_ > 0) waitpid(child_, nullptr, 0);
  }
  BaselineRun(const BaselineRun&) = delete;
  BaselineRun& operator=(const BaselineRun&) = delete;

  Json results() {
    std::string text;
    char buffer[65536];
    for (ssize_t n; (n = read(from_, buffer, sizeof buffer)) > 0;) text.append(buffer, static_cast<std::size_t>(n));
    Json results = Json::parse(text, nullptr, false);
    if (results.is_discarded()) throw std::runtime_error("the baseline run ended without a result");
    if (results.contains("error"))
      throw UsageError("in the baseline run: " + results["error"].get<std::string>() +
                       "\n(baseline = off leaves it out)");
    return results;
  }

 private:
  pid_t child_ = -1;
  int from_ = -1;
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
  if (!settings.baseline) return run(settings, progress);
  sound_table(settings);  // before anything is started
  if (settings.protocol == baseline_protocol) {
    Json results = run(settings, progress);
    results["baseline"] = baseline_summary(results);
    return results;
  }
  BaselineRun baseline(settings);
  Json results = run(settings, progress);
  results["baseline"] = baseline_summary(baseline.results());
  return results;
}

}  // namespace earshot
