// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "keys.h"

#include <algorithm>
#include <cctype>
#include <sstream>

#include "key_readers.h"

namespace earshot {
namespace {

using S = Settings;
using D = DramConfig;

std::string apply_size(const std::string& text, Settings& settings) {
  return parse_size(text, settings.geometry.size_bytes) ? "" : "a size in bytes: 16384, 16KiB, 1MiB";
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

// "ram 0x0..0x7fffffff cached, uart 0x80000000..0x80000fff uncached max-burst 4"
std::string apply_windows(const std::string& text, Settings& settings) {
  const std::string expected =
      "windows as NAME FIRST..LAST cached|uncached [max-burst BYTES], separated by commas, names of letters, "
      "digits and _, bytes 0 for any or a power of two to 256";
  std::vector<Window> windows;
  std::istringstream all(text);
  for (std::string one; std::getline(all, one, ',');) {
    std::istringstream words(one);
    std::string range, kind, limit, bytes, rest;
    Window window;
    std::uint64_t last = 0, burst = 0;
    words >> window.name >> range >> kind >> limit >> bytes;
    if (!limit.empty() && (limit != "max-burst" || !parse_number(bytes, burst) || burst > 256)) return expected;
    window.max_burst = static_cast<unsigned>(burst);
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

std::string apply_pattern(const std::string& text, Settings& settings) {
  settings.uses_pattern = !text.empty();
  if (!text.empty()) settings.pattern.kind = text;
  return {};  // make_pattern() knows the kinds, and what goes together
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

const Need arbitrated{"timing", {"arbitrated"}};
const Need dram{"memory.kind", {"dram"}};
constexpr std::uint64_t most_queued = 4096;
constexpr std::uint64_t most_clocks = std::uint64_t{1} << 32;

std::vector<Key> bus_keys() {
  return {
      {"bus.clock", "5ns", "period of the bus clock", time(at(&S::bus_clock), 1)},
      {"bus.kind", "split", "split: address and data bus are granted apart; connected: held to the last beat",
       choice<BusStructure>(at(&S::structure), {{"split", BusStructure::split},
                                                                  {"connected", BusStructure::connected}})},
      {"bus.arbitration", "first-come",
       "first-come, round-robin, fixed-priority, time-slots, weighted-round-robin, lottery",
       choice<Arbitration>(at(&S::arbiter, &ArbiterConfig::kind), {
                    {"first-come", Arbitration::first_come},
                    {"round-robin", Arbitration::round_robin},
                    {"fixed-priority", Arbitration::fixed_priority},
                    {"time-slots", Arbitration::time_slots},
                    {"weighted-round-robin", Arbitration::weighted_round_robin},
                    {"lottery", Arbitration::lottery}}),
       {arbitrated}},
      {"bus.priorities", "", "fixed-priority: initiators, first in line first; else in their order",
       numbers(at(&S::arbiter, &ArbiterConfig::priorities)), {{"bus.arbitration", {"fixed-priority"}}}},
      {"bus.weights", "", "weighted-round-robin, lottery: one an initiator; else all 1",
       numbers(at(&S::arbiter, &ArbiterConfig::weights)),
       {{"bus.arbitration", {"weighted-round-robin", "lottery"}}}},
      {"bus.slots", "", "time-slots: the initiator of each slot, repeated for ever; else each once",
       numbers(at(&S::arbiter, &ArbiterConfig::slots)), {{"bus.arbitration", {"time-slots"}}}},
      {"bus.slot-cycles", "8", "time-slots: bus cycles in a slot",
       number(at(&S::arbiter, &ArbiterConfig::slot_cycles), 1, 1000000), {{"bus.arbitration", {"time-slots"}}}},
      {"bus.arbitration-seed", "1", "for the lottery",
       number(at(&S::arbiter, &ArbiterConfig::seed), 0, ~std::uint64_t{0}), {{"bus.arbitration", {"lottery"}}}},
      {"bus.width", "8", "bytes the data bus moves in a cycle", power_of_two(at(&S::bus_width))},
      {"bus.arbitration-cycles", "1", "from request to grant, uncontended",
       number(at(&S::arbitration_cycles), 0, 1000)},
      {"bus.address-cycles", "1", "an address on the address bus", number(at(&S::address_cycles), 1, 1000)},
      {"bus.snoop-cycles", "1", "the other caches look the line up", number(at(&S::snoop_cycles), 0, 1000)},
      {"bus.supply-cycles", "2", "a cache reads a line out for another", number(at(&S::supply_cycles), 0, 1000)},
      {"bus.turnaround-cycles", "0", "the data bus rests after every transfer",
       number(at(&S::turnaround_cycles), 0, 1000)},
      {"bus.outstanding", "8", "transactions under way at once, from grant to last beat",
       number(at(&S::bus_outstanding), 1, 1024), {arbitrated}},
      {"bus.stall-cycles", "1000000", "nothing completes for so long: a finding; 0: never",
       number(at(&S::stall_cycles), 0, 1000000000000), {arbitrated}},
      {"bus.longest-wait", "0ns", "an initiator waits longer for a grant: a finding; 0ns: no limit",
       time(at(&S::longest_wait), 0), {arbitrated}},
      {"bus.windows", "memory 0x0..0xffffffffffffffff cached",
       "the address map: NAME FIRST..LAST cached|uncached [max-burst BYTES], ... (dram, not given: what it holds)",
       apply_windows},
  };
}

std::vector<Key> cache_keys() {
  return {
      {"caches.count", "4", "caches on the bus, one for each initiator", number(at(&S::caches), 1, most_initiators)},
      {"caches.protocol", "dirty-owner-update", "a built-in protocol, or the path of a table file",
       word(at(&S::protocol))},
      {"caches.update-limit", "0", "competitive-update: unused updates until a copy goes; 0: the table's own",
       number(at(&S::update_limit), 0, 15)},
      {"caches.size", "16KiB", "bytes in each cache", apply_size},
      {"caches.ways", "4", "lines in each set", number(at(&S::geometry, &Geometry::ways), 1, 65536)},
      {"caches.line", "32", "bytes in a line: 8 to 256", apply_line},
      {"caches.replacement", "lru", "who makes room: lru, tree-plru, fifo, random", apply_replacement},
      {"caches.seed", "1", "for random replacement", apply_seed},
      {"caches.hit-time", "1ns", "to look a line up", time(at(&S::hit_time), 0)},
      {"caches.misses", "4", "lines a cache fetches or asks for at once", number(at(&S::misses), 1, 64), {arbitrated}},
      {"caches.write-back-slots", "2", "victims of a cache on their way to memory",
       number(at(&S::write_back_slots), 1, 64), {arbitrated}},
  };
}

std::vector<Key> plain_memory_keys() {
  return {
      {"memory.kind", "plain", "plain: every access takes a fixed time, one at a time; dram: by JEDEC timing",
       choice<MemoryKind>(at(&S::memory_kind), {{"plain", MemoryKind::plain},
                                                                {"dram", MemoryKind::dram}})},
      {"memory.read-latency", "40ns", "plain, and uncached windows: of each read, before its beats",
       time(at(&S::read_latency), 0)},
      {"memory.write-latency", "40ns", "likewise: of each write, before its beats", time(at(&S::write_latency), 0)},
      {"memory.beat-time", "5ns", "likewise: of each beat", time(at(&S::beat_time), 0)},
      {"memory.beat", "8", "likewise: bytes in a beat", power_of_two(at(&S::beat_bytes))},
  };
}

std::vector<Key> dram_keys() {
  const Need first_ready{"memory.scheduling", {"first-ready"}};
  return {
      {"memory.grade", "ddr4-2400t", "a built-in grade, or the path of a grade file", word(at(&S::grade)), {dram}},
      {"memory.density", "0", "Gbit of a device; 0: the grade's usual", number(at(&S::density), 0, 1024), {dram}},
      {"memory.device-width", "0", "data bits of a device; 0: the grade's usual", number(at(&S::device_width), 0, 64),
       {dram}},
      {"memory.channels", "1", "DRAM channels", number(at(&S::dram, &D::channels), 1, 64), {dram}},
      {"memory.ranks", "1", "ranks in each channel", number(at(&S::dram, &D::ranks), 1, 16), {dram}},
      {"memory.channel-width", "0", "data bits of a channel; 0: the grade's usual",
       number(at(&S::dram, &D::channel_bits), 0, 1024), {dram}},
      {"memory.scheduling", "first-ready", "first-ready (row hits first), first-come, one-at-a-time",
       choice<DramScheduling>(at(&S::dram, &D::scheduling), {{"first-ready", DramScheduling::first_ready},
                                                                    {"first-come", DramScheduling::first_come},
                                                                    {"one-at-a-time", DramScheduling::one_at_a_time}}),
       {dram, arbitrated}},
      {"memory.age-cap", "2000", "first-ready: older requests go first, in DRAM clocks",
       number(at(&S::dram, &D::age_cap), 1, most_clocks), {dram, arbitrated, first_ready}},
      {"memory.read-queue", "32", "bursts a channel's read queue holds",
       number(at(&S::dram, &D::read_queue), 1, most_queued), {dram, arbitrated}},
      {"memory.write-queue", "32", "bursts a channel's write queue holds",
       number(at(&S::dram, &D::write_queue), 1, most_queued), {dram}},
      {"memory.write-high", "24", "first-ready: so many queued writes are served before reads",
       number(at(&S::dram, &D::write_high), 1, most_queued), {dram, arbitrated, first_ready}},
      {"memory.write-low", "8", "first-ready: down to so many", number(at(&S::dram, &D::write_low), 0, most_queued),
       {dram, arbitrated, first_ready}},
      {"memory.row-policy", "open", "when a row is closed: open (never), closed (at once), idle-timeout",
       choice<DramRows>(at(&S::dram, &D::rows), {{"open", DramRows::open},
                                                              {"closed", DramRows::closed},
                                                              {"idle-timeout", DramRows::idle_timeout}}),
       {dram}},
      {"memory.row-timeout", "200", "idle-timeout: DRAM clocks after a bank's last command",
       number(at(&S::dram, &D::idle_timeout), 0, most_clocks),
       {dram, {"memory.row-policy", {"idle-timeout"}}}},
      {"memory.address-map", "row rank bank column group channel",
       "fields of an address, most significant first", word(at(&S::dram, &D::address_map)), {dram}},
      {"memory.bank-hash", "off", "banks are chosen by bank bits XOR row bits",
       yes_no(at(&S::dram, &D::hash_banks)), {dram}},
      {"memory.refresh", "all-bank", "all-bank, per-bank, off",
       choice<DramRefresh>(at(&S::dram, &D::refresh), {{"all-bank", DramRefresh::all_bank},
                                                                 {"per-bank", DramRefresh::per_bank},
                                                                 {"off", DramRefresh::off}}),
       {dram}},
      {"memory.frontend", "0", "DRAM clocks from a request to its place in a queue",
       number(at(&S::dram, &D::frontend), 0, most_clocks), {dram}},
      {"memory.backend", "0", "DRAM clocks from the last beat to the response",
       number(at(&S::dram, &D::backend), 0, most_clocks), {dram}},
      {"memory.command-log", "", "path to write every DRAM command to, as CSV", word(at(&S::command_log)),
       {dram, arbitrated}},
  };
}

std::vector<Key> workload_keys() {
  using P = PatternConfig;
  return {
      {"workload.recording", "", "path of a recording; relative to the file that names it", word(at(&S::recording))},
      {"workload.order", "recorded", "recorded: one access at a time; concurrent: each initiator on its own",
       choice<Order>(at(&S::order), {{"recorded", Order::recorded},
                                                                          {"concurrent", Order::concurrent}})},
      {"workload.addresses", "recorded", "recorded: as they are; packed: pages nobody touches are left out",
       choice<bool>(at(&S::packed), {{"recorded", false}, {"packed", true}})},
      {"workload.outstanding", "1", "accesses an initiator keeps in flight", number(at(&S::in_flight), 1, 64),
       {arbitrated, {"workload.order", {"concurrent"}}}},
      {"workload.think", "0ns", "passes in an initiator before each access", time(at(&S::think), 0)},
      {"workload.think-spread", "0", "percent by which it is more or less, evenly",
       number(at(&S::think_spread), 0, 100)},
      {"workload.pattern", "",
       "instead of a recording: private, read-shared, producer-consumer, migratory, false-sharing, uniform",
       apply_pattern},
      {"workload.accesses", "100000", "of each initiator, for a pattern",
       number(at(&S::pattern, &P::accesses), 1, std::uint64_t{1} << 40)},
      {"workload.lines", "64", "lines a pattern touches", number(at(&S::pattern, &P::lines), 1, 1u << 20)},
      {"workload.word", "4", "bytes in each of a pattern's accesses", number(at(&S::pattern, &P::word_bytes), 1, 8)},
      {"workload.write-percent", "30", "share of writes, for patterns that choose",
       number(at(&S::pattern, &P::write_percent), 0, 100)},
      {"workload.seed", "1", "for a pattern, and for think-spread", number(at(&S::pattern, &P::seed), 0, ~std::uint64_t{0})},
  };
}

std::vector<Key> run_keys() {
  return {
      {"timing", "annotated", "annotated: delays are computed, nothing blocks; arbitrated: requests queue for grants",
       choice<BusTiming>(at(&S::timing), {{"annotated", BusTiming::annotated},
                                                               {"arbitrated", BusTiming::arbitrated}})},
      {"quantum", "1us", "annotated: how far an initiator may run ahead of the others; 0ns: not at all",
       time(at(&S::quantum), 0)},
      {"monitor", "auto", "check every access for coherence: on, off, auto (on in recorded order)", apply_monitor},
      {"flush-at-end", "on", "write dirty lines back at the end and compare memory", yes_no(at(&S::flush_at_end))},
      {"baseline", "on", "also run write-through-update on the same input", yes_no(at(&S::baseline))},
  };
}

}  // namespace

const std::vector<Key>& keys() {
  static const std::vector<Key> table = [] {
    std::vector<Key> all;
    for (auto* section : {bus_keys, cache_keys, plain_memory_keys, dram_keys, workload_keys, run_keys})
      for (Key& key : section()) all.push_back(std::move(key));
    return all;
  }();
  return table;
}

}  // namespace earshot
