// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "keys.h"

#include <algorithm>
#include <cctype>
#include <sstream>

#include "quantities.h"

namespace earshot {
namespace {

using Apply = std::function<std::string(const std::string&, Settings&)>;

template <typename Number>
Apply number(Number Settings::*member, std::uint64_t least, std::uint64_t most) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::uint64_t value = 0;
    if (!parse_number(text, value) || value < least || value > most)
      return "a whole number from " + std::to_string(least) + " to " + std::to_string(most);
    settings.*member = static_cast<Number>(value);
    return {};
  };
}

// At most 1 ms: with cycle counts up to 1000 that leaves room for 10^7 of the slowest transactions in 2^64 ps.
Apply time(Picoseconds Settings::*member, Picoseconds least) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    Picoseconds value = 0;
    if (!parse_time(text, settings.bus_clock, value) || value < least || value > Picoseconds{1000000000})
      return std::string("a time ") + (least > 0 ? "above 0, " : "") +
             "of at most 1 ms in whole picoseconds, with a unit: 5ns, 1.25ns, 800ps, 1us, 3 bus-cycles";
    settings.*member = value;
    return {};
  };
}

Apply yes_no(bool Settings::*member) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    return parse_yes_no(text, settings.*member) ? "" : "on or off";
  };
}

Apply word(std::string Settings::*member) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    settings.*member = text;
    return {};
  };
}

// A key that has only one value as yet.
Apply only(const std::string& value) {
  return [=](const std::string& text, Settings&) -> std::string { return text == value ? "" : value; };
}

std::string apply_size(const std::string& text, Settings& settings) {
  return parse_size(text, settings.geometry.size_bytes) ? "" : "a size in bytes: 16384, 16KiB, 1MiB";
}

std::string apply_ways(const std::string& text, Settings& settings) {
  std::uint64_t value = 0;
  if (!parse_number(text, value) || value < 1 || value > 65536) return "a whole number from 1 to 65536";
  settings.geometry.ways = static_cast<unsigned>(value);
  return {};
}

std::string apply_line(const std::string& text, Settings& settings) {
  std::uint64_t value = 0;
  if (!parse_size(text, value) || value < 8 || value > 256) return "a size from 8 to 256 bytes: 32, 64B";
  settings.geometry.line_bytes = static_cast<unsigned>(value);
  return {};
}

std::string apply_replacement(const std::string& text, Settings& settings) {
  return replacement_from(text, settings.geometry.replacement) ? "" : "lru, tree-plru, fifo or random";
}

std::string apply_seed(const std::string& text, Settings& settings) {
  return parse_number(text, settings.geometry.seed) ? "" : "a whole number";
}

template <unsigned Settings::*member>
std::string apply_width(const std::string& text, Settings& settings) {
  std::uint64_t value = 0;
  if (!parse_size(text, value) || value < 1 || value > 256 || (value & (value - 1)) != 0)
    return "a power of two from 1 to 256 bytes: 8, 16B";
  settings.*member = static_cast<unsigned>(value);
  return {};
}

// "ram 0x0..0x7fffffff cached, uart 0x80000000..0x80000fff uncached"
std::string apply_windows(const std::string& text, Settings& settings) {
  const std::string expected =
      "windows as NAME FIRST..LAST cached|uncached, separated by commas, names of letters, digits and _";
  std::vector<Window> windows;
  std::istringstream all(text);
  for (std::string one; std::getline(all, one, ',');) {
    std::istringstream words(one);
    std::string range, kind, rest;
    Window window;
    std::uint64_t last = 0;
    words >> window.name >> range >> kind;
    const std::size_t dots = range.find("..");
    const bool named = std::all_of(window.name.begin(), window.name.end(), [](unsigned char c) {
      return std::isalnum(c) != 0 || c == '_';
    });
    if (!named || words >> rest || (kind != "cached" && kind != "uncached") || dots == std::string::npos ||
        !parse_number(range.substr(0, dots), window.base) || !parse_number(range.substr(dots + 2), last) ||
        last < window.base)
      return expected;
    window.cached = kind == "cached";
    window.size = last - window.base + 1;  // 0 for the whole space, as Window has it
    window.target_base = window.base;
    if (window.size == 0 && window.base != 0) return expected;
    windows.push_back(window);
  }
  if (windows.empty()) return expected;
  settings.windows = windows;
  return {};
}

std::string apply_order(const std::string& text, Settings& settings) {
  if (text != "recorded" && text != "concurrent") return "recorded or concurrent";
  settings.order = text == "recorded" ? Order::recorded : Order::concurrent;
  return {};
}

std::string apply_pattern(const std::string& text, Settings& settings) {
  settings.uses_pattern = !text.empty();
  if (!text.empty()) settings.pattern.kind = text;
  return {};  // make_pattern() knows the kinds, and what goes together
}

template <typename Number>
Apply pattern_number(Number PatternConfig::*member, std::uint64_t least, std::uint64_t most) {
  return [=](const std::string& text, Settings& settings) -> std::string {
    std::uint64_t value = 0;
    if (!parse_number(text, value) || value < least || value > most)
      return "a whole number from " + std::to_string(least) + " to " + std::to_string(most);
    settings.pattern.*member = static_cast<Number>(value);
    return {};
  };
}

std::string apply_monitor(const std::string& text, Settings& settings) {
  bool on = false;
  if (text == "auto") {
    settings.monitor = Watch::where_recorded;
  } else if (parse_yes_no(text, on)) {
    settings.monitor = on ? Watch::always : Watch::never;
  } else {
    return "auto, on or off";
  }
  return {};
}

}  // namespace

const std::vector<Key>& keys() {
  static const std::vector<Key> table{
      {"bus.clock", "5ns", "period of the bus clock", time(&Settings::bus_clock, 1)},
      {"bus.kind", "split", "address and data bus are granted apart: split", only("split")},
      {"bus.arbitration", "first-come", "the earliest request gets the earliest gap: first-come", only("first-come")},
      {"bus.width", "8", "bytes the data bus moves in a cycle", apply_width<&Settings::bus_width>},
      {"bus.arbitration-cycles", "1", "from request to grant, uncontended",
       number(&Settings::arbitration_cycles, 0, 1000)},
      {"bus.address-cycles", "1", "an address on the address bus", number(&Settings::address_cycles, 1, 1000)},
      {"bus.snoop-cycles", "1", "the other caches look the line up", number(&Settings::snoop_cycles, 0, 1000)},
      {"bus.supply-cycles", "2", "a cache reads a line out for another", number(&Settings::supply_cycles, 0, 1000)},
      {"bus.windows", "memory 0x0..0xffffffffffffffff cached",
       "the address map: NAME FIRST..LAST cached|uncached, ...", apply_windows},

      {"caches.count", "4", "caches on the bus, one for each initiator", number(&Settings::caches, 1, most_initiators)},
      {"caches.protocol", "dirty-owner-update", "a built-in protocol, or the path of a table file",
       word(&Settings::protocol)},
      {"caches.update-limit", "0", "competitive-update: unused updates until a copy goes; 0: the table's own",
       number(&Settings::update_limit, 0, 15)},
      {"caches.size", "16KiB", "bytes in each cache", apply_size},
      {"caches.ways", "4", "lines in each set", apply_ways},
      {"caches.line", "32", "bytes in a line: 8 to 256", apply_line},
      {"caches.replacement", "lru", "who makes room: lru, tree-plru, fifo, random", apply_replacement},
      {"caches.seed", "1", "for random replacement", apply_seed},
      {"caches.hit-time", "1ns", "to look a line up", time(&Settings::hit_time, 0)},

      {"memory.kind", "plain", "plain: every access takes a fixed time, one at a time", only("plain")},
      {"memory.read-latency", "40ns", "of each read, before its beats", time(&Settings::read_latency, 0)},
      {"memory.write-latency", "40ns", "of each write, before its beats", time(&Settings::write_latency, 0)},
      {"memory.beat-time", "5ns", "of each beat", time(&Settings::beat_time, 0)},
      {"memory.beat", "8", "bytes in a beat", apply_width<&Settings::beat_bytes>},

      {"workload.recording", "", "path of a recording; relative to the file that names it",
       word(&Settings::recording)},
      {"workload.order", "recorded", "recorded: one access at a time; concurrent: each initiator on its own",
       apply_order},
      {"workload.think", "0ns", "passes in an initiator before each access", time(&Settings::think, 0)},
      {"workload.pattern", "",
       "instead of a recording: private, read-shared, producer-consumer, migratory, false-sharing, uniform",
       apply_pattern},
      {"workload.accesses", "100000", "of each initiator, for a pattern",
       pattern_number(&PatternConfig::accesses, 1, std::uint64_t{1} << 40)},
      {"workload.lines", "64", "lines a pattern touches", pattern_number(&PatternConfig::lines, 1, 1u << 20)},
      {"workload.word", "4", "bytes in each of a pattern's accesses", pattern_number(&PatternConfig::word_bytes, 1, 8)},
      {"workload.write-percent", "30", "share of writes, for patterns that choose",
       pattern_number(&PatternConfig::write_percent, 0, 100)},
      {"workload.seed", "1", "for a pattern", pattern_number(&PatternConfig::seed, 0, ~std::uint64_t{0})},

      {"timing", "annotated", "how time passes: annotated (delays are computed, nothing blocks)", only("annotated")},
      {"quantum", "1us", "how far an initiator may run ahead of the others; 0ns: not at all",
       time(&Settings::quantum, 0)},
      {"monitor", "auto", "check every access for coherence: on, off, auto (on in recorded order)", apply_monitor},
      {"flush-at-end", "on", "write dirty lines back at the end and compare memory", yes_no(&Settings::flush_at_end)},
      {"baseline", "on", "also run write-through-update on the same input", yes_no(&Settings::baseline)},
  };
  return table;
}

}  // namespace earshot
