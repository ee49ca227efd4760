// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "report.h"

#include <algorithm>
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

std::uint64_t count(const Json& json, const char* key) {
  return json.at(key).get<std::uint64_t>();
}
double real(const Json& json, const char* key) {
  return json.at(key).get<double>();
}
std::string counted(const Json& json, const char* key) {
  return with_commas(count(json, key));
}

std::string setting(const Json& results, const char* section, const char* key) {
  return results.at("configuration").at(section).at(key).get<std::string>();
}

std::uint64_t memory_writes(const Json& document) {
  return count(document.at("memory"), "block-writes") + count(document.at("memory"), "word-writes");
}

std::string writes_in_words(const Json& document) {
  return counted(document.at("memory"), "block-writes") + " lines and " +
         counted(document.at("memory"), "word-writes") + " words";
}

std::string headline(const Json& results) {
  const std::string recording = setting(results, "workload", "recording");
  const std::string input = recording.empty() ? "the pattern " + setting(results, "workload", "pattern")
                                              : std::filesystem::path(recording).filename().string();
  const std::uint64_t played = count(results.at("accesses"), "reads") +
                               count(results.at("accesses"), "writes") +
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
  const Json& first = results.at("bottleneck");
  const std::string name = first.at("resource").get<std::string>();
  const double busy = real(first, "utilisation");
  std::string text = "First to saturate is the " + name + format(", %.1f %% busy now", 100 * busy);
  if (busy >= 0.95)
    text += ": it is saturated.";
  else if (busy > 0)
    text += format(": it bears %.*f times this load.", busy > 0.1 ? 1 : 0, 1 / busy);
  if (!first.at("initiators-at-saturation").is_null())
    text += format(" %.1f initiators are at work at once, on average; about %.1f like these saturate it.",
                   real(first, "initiators-at-work"), real(first, "initiators-at-saturation"));
  std::string others;
  for (const Json& one : first.at("resources"))
    if (const std::string other = one.at("resource").get<std::string>(); other != name)
      others += (others.empty() ? " The others: " : ", ") + other +
                format(" %.1f %%", 100 * real(one, "utilisation"));
  text += others +
          format("%s The run takes %.3f us", others.empty() ? "" : ".", real(results, "elapsed-ns") / 1000);
  if (results.contains("baseline"))
    text += format(", the baseline %.3f us", real(results.at("baseline"), "elapsed-ns") / 1000);
  return wrapped(text + ".", 2);
}

std::string supplies(const Json& results) {
  const Json& from = results.at("supplies");
  return wrapped("Lines fetched: " + counted(from, "owner") + " from an owner instead of memory, " +
                     counted(from, "sharer") + " from a clean copy, " + counted(from, "memory") +
                     " from memory.",
                 2);
}

std::string latency_table(const Json& results) {
  const Json& latency = results.at("latency");
  const double mean = real(latency, "mean-ns");
  std::string out = format(
      "  An access takes %.3f ns on average: half within %.1f, 95 %% within %.1f,\n"
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

std::string kind_table(const Json& results) {
  std::string out = "  Kind of access          count    mean ns     p95 ns     p99 ns     max ns\n";
  for (const auto& [kind, one] : results.at("latency").at("kinds").items()) {
    if (count(one, "count") == 0) continue;
    out += format("    %-16s %10s %10.2f %10.1f %10.1f %10.1f%s\n", kind.c_str(),
                  counted(one, "count").c_str(), real(one, "mean-ns"), real(one, "p95-ns"),
                  real(one, "p99-ns"), real(one, "max-ns"), kind == "write-back" ? " *" : "");
  }
  const bool written_back = count(results.at("latency").at("kinds").at("write-back"), "count") > 0;
  return out + (written_back ? "    * of these no access waits for the end\n" : "");
}

std::string bus_table(const Json& results) {
  const Json& bus = results.at("bus");
  std::string out = "  Bus transaction       count    mean ns    waiting  address cycles  data cycles\n";
  for (const auto& [kind, number] : bus.at("transactions").items()) {
    const Json& cost = bus.at("costs").at(kind);
    if (number.get<std::uint64_t>() == 0) continue;
    out +=
        format("    %-14s %10s %10.2f %10.2f %15s %12s\n", kind.c_str(),
               with_commas(number.get<std::uint64_t>()).c_str(), real(cost, "mean-ns"), real(cost, "wait-ns"),
               counted(cost, "address-cycles").c_str(), counted(cost, "data-cycles").c_str());
  }
  return out;
}

std::string dram_lines(const Json& results) {
  std::string out;
  for (const Json& dram : results.at("memory").at("dram")) {
    const double hits = real(dram, "row-hits"), closed = real(dram, "row-closed"),
                 conflicts = real(dram, "row-conflicts");
    const double all = std::max(1.0, hits + closed + conflicts);
    std::string text = "DRAM " + dram.at("grade").get<std::string>() + ", " + counted(dram, "channels") +
                       " x " + counted(dram, "channel-bits") + " bits";
    if (results.at("memory").at("dram").size() > 1)
      text += ", window " + dram.at("window").get<std::string>();
    text += ": of " + counted(dram, "read-bursts") + " reads and " + counted(dram, "write-bursts") +
            " writes " +
            format("%.1f %% found their row open, %.1f %% the bank closed, %.1f %% another row; ",
                   100 * hits / all, 100 * closed / all, 100 * conflicts / all) +
            counted(dram, "refreshes") + " refreshes";
    if (const std::uint64_t banks = count(dram, "bank-refreshes"); banks > 0)
      text += ", " + with_commas(banks) + " of single banks";
    const Json& energy = dram.at("energy");
    if (energy.at("estimated").get<bool>())
      text += format(". Energy, an estimate: %.1f uJ (%.1f uJ of it standby) with the currents of ",
                     real(energy, "total-nj") / 1000, real(energy, "background-nj") / 1000) +
              energy.at("part").get<std::string>();
    else
      text += ". Energy: " + energy.at("method").get<std::string>();
    out += wrapped(text + ".", 2) + "\n";
  }
  return out;
}

std::string grant_table(const Json& results) {
  const Json& grants = results.at("bus").at("grants");
  if (grants.empty()) return {};
  std::string out = "  Initiator      grants   mean wait ns   longest wait ns\n";
  for (const Json& one : grants)
    out += format("    %-7llu %11s %14.2f %17.1f\n", static_cast<unsigned long long>(count(one, "initiator")),
                  counted(one, "grants").c_str(), real(one, "mean-wait-ns"), real(one, "longest-wait-ns"));
  return out + "\n";
}

std::string initiator_table(const Json& results) {
  std::string out = "  Initiator       reads      writes    hits %    mean ns     p99 ns     max ns\n";
  for (const Json& one : results.at("initiators")) {
    const Json& accesses = one.at("accesses");
    const double all = static_cast<double>(count(accesses, "reads") + count(accesses, "writes"));
    out += format("    %-7llu %11s %11s %9.2f %10.3f %10.1f %10.1f\n",
                  static_cast<unsigned long long>(count(one, "initiator")),
                  counted(accesses, "reads").c_str(), counted(accesses, "writes").c_str(),
                  all > 0 ? 100 * static_cast<double>(count(accesses, "hits")) / all : 0.0,
                  real(one.at("latency"), "mean-ns"), real(one.at("latency"), "p99-ns"),
                  real(one.at("latency"), "max-ns"));
  }
  return out;
}

std::string checks(const Json& results) {
  const Json& done = results.at("checks");
  std::string text = done.at("monitored").get<bool>()
                         ? "Coherence: " + counted(done, "line-accesses-checked") +
                               " accesses of lines checked, no violation"
                         : "Coherence was not monitored (monitor = on does)";
  if (count(done, "reads-compared-with-recording") > 0)
    text += "; " + counted(done, "reads-compared-with-recording") + " reads returned the recorded value";
  const std::uint64_t dirty = count(done, "dirty-lines-left");
  const std::uint64_t at_end = count(results.at("memory"), "block-writes-at-end");
  if (at_end > 0)
    text += "; " + with_commas(at_end) + " dirty lines were written back at the end (counted above)";
  if (dirty > 0) text += "; " + with_commas(dirty) + " lines are still dirty in caches";
  if (count(done, "queues-checked") > 0)
    text += "; Little's law holds in " + counted(done, "queues-checked") + " queues";
  return wrapped(text + ".", 2);
}

}  // namespace

std::string text_answer(const Json& results) {
  return headline(results) + "\n" + decision(results) + "\n" + saturation(results) + "\n" +
         supplies(results) + "\n" + latency_table(results) + "\n" + kind_table(results) + "\n" +
         bus_table(results) + "\n" + dram_lines(results) + initiator_table(results) + "\n" +
         grant_table(results) + checks(results) + "\n" + wrapped(results.at("caution").get<std::string>(), 2);
}

// A path need not be UTF-8; JSON must.
std::string json_text(const Json& results) {
  return results.dump(2, ' ', false, Json::error_handler_t::replace) + "\n";
}

}  // namespace earshot
