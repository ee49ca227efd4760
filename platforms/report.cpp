// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "report.h"

#include <algorithm>
#include <array>
#include <cstdarg>
#include <cstdio>
#include <filesystem>

#include "quantities.h"

namespace earshot {
namespace {

constexpr std::size_t columns = 80;

std::string format(const char* pattern, ...) __attribute__((format(printf, 1, 2)));
std::string format(const char* pattern, ...) {
  char buffer[512];
  va_list arguments;
  va_start(arguments, pattern);
  std::vsnprintf(buffer, sizeof buffer, pattern, arguments);
  va_end(arguments);
  return buffer;
}

std::string wrapped(const std::string& text, std::size_t indent) {
  std::string out, line(indent, ' ');
  std::size_t at = 0;
  while (at < text.size()) {
    std::size_t end = text.find(' ', at);
    if (end == std::string::npos) end = text.size();
    const std::string word = text.substr(at, end - at);
    if (line.size() > indent && line.size() + 1 + word.size() > columns) {
      out += line + "\n";
      line.assign(indent, ' ');
    }
    if (line.size() > indent) line += ' ';
    line += word;
    at = end + 1;
  }
  return out + line + "\n";
}

std::uint64_t count(const Json& json, const char* key) { return json.at(key).get<std::uint64_t>(); }
double real(const Json& json, const char* key) { return json.at(key).get<double>(); }
std::string counted(const Json& json, const char* key) { return with_commas(count(json, key)); }

std::string setting(const Json& results, const char* section, const char* key) {
  return results.at("configuration").at(section).at(key).get<std::string>();
}

std::uint64_t memory_writes(const Json& document) {
  return count(document.at("memory"), "block-writes") + count(document.at("memory"), "word-writes");
}

std::string writes_in_words(const Json& document) {
  return counted(document.at("memory"), "block-writes") + " lines and " + counted(document.at("memory"), "word-writes") +
         " words";
}

std::string headline(const Json& results) {
  const std::string recording = setting(results, "workload", "recording");
  const std::string input = recording.empty() ? "the pattern " + setting(results, "workload", "pattern")
                                              : std::filesystem::path(recording).filename().string();
  const std::uint64_t played = count(results.at("accesses"), "reads") + count(results.at("accesses"), "writes") +
                               count(results.at("accesses"), "uncached");
  return wrapped(results.at("protocol").get<std::string>() + ": " + setting(results, "caches", "count") +
                     " caches of " + setting(results, "caches", "size") + ", " + with_commas(played) +
                     " accesses of " + input + " in " + setting(results, "workload", "order") + " order",
                 0);
}

std::string decision(const Json& results) {
  const std::uint64_t now = memory_writes(results);
  std::string text = "Memory is written " + with_commas(now) + " times (" + writes_in_words(results) + ")";
  if (!results.contains("baseline")) return wrapped(text + "; the baseline was not run.", 2);
  const Json& baseline = results.at("baseline");
  const std::uint64_t before = memory_writes(baseline);
  const std::string name = baseline.at("protocol").get<std::string>();
  if (setting(results, "caches", "protocol") == name) return wrapped(text + "; this is the baseline.", 2);
  text += ", under " + name + " " + with_commas(before) + " times (" + writes_in_words(baseline) + "): ";
  if (now == before)
    text += "no difference.";
  else if (now == 0)
    text += "every write to memory is avoided.";
  else if (before == 0)
    text += "MORE writes, where the baseline has none.";
  else if (now < before)
    text += format("%.2f times fewer writes.", static_cast<double>(before) / static_cast<double>(now));
  else
    text += format("%.2f times MORE writes.", static_cast<double>(now) / static_cast<double>(before));
  return wrapped(text, 2);
}

std::string saturation(const Json& results) {
  struct Resource {
    const char* name;
    double busy;
  };
  std::array<Resource, 3> resources{{{"the address bus", real(results.at("bus"), "address-utilisation")},
                                     {"the data bus", real(results.at("bus"), "data-utilisation")},
                                     {"memory", real(results.at("memory"), "utilisation")}}};
  std::stable_sort(resources.begin(), resources.end(),
                   [](const Resource& a, const Resource& b) { return a.busy > b.busy; });
  std::string text = "First to saturate is " + std::string(resources[0].name) +
                     format(", %.1f %% busy now", 100 * resources[0].busy);
  for (std::size_t i = 1; i < resources.size(); ++i)
    text += format("; %s %.1f %%", resources[i].name, 100 * resources[i].busy);
  text += format(". The run takes %.3f us", real(results, "elapsed-ns") / 1000);
  if (results.contains("baseline"))
    text += format(", the baseline %.3f us", real(results.at("baseline"), "elapsed-ns") / 1000);
  return wrapped(text + ".", 2);
}

std::string supplies(const Json& results) {
  const Json& from = results.at("supplies");
  return wrapped("Lines fetched: " + counted(from, "owner") + " from an owner instead of memory, " +
                     counted(from, "sharer") + " from a clean copy, " + counted(from, "memory") + " from memory.",
                 2);
}

std::string latency_table(const Json& results) {
  const Json& latency = results.at("latency");
  const double mean = real(latency, "mean-ns");
  std::string out = format("  An access takes %.3f ns on average: half within %.1f, 95 %% within %.1f,\n"
                           "  99 %% within %.1f, the slowest %.1f ns. Where the average goes:\n\n",
                           mean, real(latency, "p50-ns"), real(latency, "p95-ns"), real(latency, "p99-ns"),
                           real(latency, "max-ns"));
  for (const auto& [name, part] : latency.at("parts-ns").items()) {
    const double share = mean > 0 ? part.get<double>() / mean : 0;
    const std::string bar(static_cast<std::size_t>(share * 36 + 0.5), '|');
    out += format("    %-16s %10.3f ns %5.1f %%%s", name.c_str(), part.get<double>(), 100 * share,
                  bar.empty() ? "" : "  ") +
           bar + "\n";
  }
  return out + format("    %-16s %10.3f ns\n", "together", mean);
}

std::string bus_table(const Json& results) {
  const Json& bus = results.at("bus");
  std::string out = "  Bus transaction       count    mean ns    waiting  address cycles  data cycles\n";
  for (const auto& [kind, number] : bus.at("transactions").items()) {
    const Json& cost = bus.at("costs").at(kind);
    if (number.get<std::uint64_t>() == 0) continue;
    out += format("    %-14s %10s %10.2f %10.2f %15s %12s\n", kind.c_str(),
                  with_commas(number.get<std::uint64_t>()).c_str(), real(cost, "mean-ns"), real(cost, "wait-ns"),
                  counted(cost, "address-cycles").c_str(), counted(cost, "data-cycles").c_str());
  }
  return out;
}

std::string initiator_table(const Json& results) {
  std::string out = "  Initiator       reads      writes    hits %    mean ns     p99 ns     max ns\n";
  for (const Json& one : results.at("initiators")) {
    const Json& accesses = one.at("accesses");
    const double all = static_cast<double>(count(accesses, "reads") + count(accesses, "writes"));
    out += format("    %-7llu %11s %11s %9.2f %10.3f %10.1f %10.1f\n",
                  static_cast<unsigned long long>(count(one, "initiator")), counted(accesses, "reads").c_str(),
                  counted(accesses, "writes").c_str(),
                  all > 0 ? 100 * static_cast<double>(count(accesses, "hits")) / all : 0.0,
                  real(one.at("latency"), "mean-ns"), real(one.at("latency"), "p99-ns"),
                  real(one.at("latency"), "max-ns"));
  }
  return out;
}

std::string checks(const Json& results) {
  const Json& done = results.at("checks");
  std::string text = done.at("monitored").get<bool>()
                         ? "Coherence: " + counted(done, "line-accesses-checked") + " accesses of lines checked, no violation"
                         : "Coherence was not monitored (monitor = on does)";
  if (count(done, "reads-compared-with-recording") > 0)
    text += "; " + counted(done, "reads-compared-with-recording") + " reads returned the recorded value";
  const std::uint64_t dirty = count(done, "dirty-lines-left");
  const std::uint64_t at_end = count(results.at("memory"), "block-writes-at-end");
  if (at_end > 0) text += "; " + with_commas(at_end) + " dirty lines were written back at the end (counted above)";
  if (dirty > 0)
    text += "; " + with_commas(dirty) + " lines are still dirty in caches";
  return wrapped(text + ".", 2);
}

}  // namespace

std::string text_answer(const Json& results) {
  return headline(results) + "\n" + decision(results) + "\n" + saturation(results) + "\n" + supplies(results) + "\n" +
         latency_table(results) + "\n" + bus_table(results) + "\n" + initiator_table(results) + "\n" +
         checks(results) + "\n" + wrapped(results.at("caution").get<std::string>(), 2);
}

// A path need not be UTF-8; JSON must.
std::string json_text(const Json& results) { return results.dump(2, ' ', false, Json::error_handler_t::replace) + "\n"; }

}  // namespace earshot
