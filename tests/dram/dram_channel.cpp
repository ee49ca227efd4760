// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The scheduler of one DRAM channel, without a kernel: latencies and spacings from the grades' arithmetic,
// policies, refresh, bandwidth bounds, and random traffic whose every command log the independent checker
// accepts.
#include "earshot/dram/dram_channel.h"

#include <catch2/catch.hpp>
#include <map>
#include <random>

#include "dram/command_checker.h"
#include "earshot/dram/dram_estimate.h"

using namespace earshot;

namespace {

DramConfig config_of(const std::string& grade) {
  DramConfig config;
  config.grade = load_grade(grade);
  config.refresh = DramRefresh::off;
  config.log_commands = true;
  return config;
}

// A channel with a clock, and who asked for what.
struct Channel {
  DramConfig config;
  DramChannel channel;
  std::vector<DramCompletion> done;
  Clocks now = 0;
  unsigned ids = 0;

  explicit Channel(const DramConfig& given) : config(given), channel(given) {}

  unsigned ask(bool write, const DramPlace& place) {
    DramBurst burst;
    burst.id = ids++;
    burst.write = write;
    burst.number = ((place.rank * 64 + place.group * 8 + place.bank) * config.grade.rows + place.row) * 4096 +
                   place.column;
    burst.place = place;
    burst.last = config.burst_bytes();
    REQUIRE(channel.accepts(write));
    channel.enqueue(burst, now, done);
    return burst.id;
  }
  unsigned read(const DramPlace& place) { return ask(false, place); }
  unsigned write(const DramPlace& place) { return ask(true, place); }

  void pass(Clocks clocks) { go_to(now + clocks); }
  void go_to(Clocks clock) {
    while (channel.next_event() <= clock) {
      now = std::max(now, channel.next_event());
      channel.advance(now, done);
    }
    now = clock;
  }
  void finish() {
    while (channel.next_event() != DramChannel::never) {
      now = std::max(now, channel.next_event());
      channel.advance(now, done);
    }
  }
  Clocks done_at(unsigned id) {
    for (const DramCompletion& one : done)
      if (one.id == id) return one.done;
    FAIL("no completion for " << id);
    return 0;
  }
  const std::vector<CommandRecord>& log() { return channel.commands(now + 1); }
  // The clocks of all commands of this kind.
  std::vector<Clocks> clocks_of(DramCommand command) {
    std::vector<Clocks> clocks;
    for (const CommandRecord& record : log())
      if (record.command == command) clocks.push_back(record.clock);
    return clocks;
  }
};

DramPlace place(unsigned group, unsigned bank, std::uint64_t row, std::uint64_t column = 0,
                unsigned rank = 0) {
  return {0, rank, group, bank, row, column};
}

unsigned below(std::mt19937_64& random, std::uint64_t n) {
  return static_cast<unsigned>(random() % n);
}

// The toy of Rixner et al., figure 1: precharge 3 clocks, activate 3, column access 1, one command each
// clock.
DramConfig toy() {
  DramConfig config;
  config.grade.clock = {1, 1000};
  config.grade.banks_per_group = 2;
  config.grade.rows = 16;
  config.grade.burst_length = 2;
  config.grade.trcd = config.grade.trp = config.grade.trp_all = 3;
  config.grade.tras = 3;
  config.grade.trc = 6;
  config.grade.tccd_s = config.grade.tccd_l = 1;
  config.grade.read_to_write = 1;
  config.grade.rank_switch = 0;
  config.refresh = DramRefresh::off;
  config.log_commands = true;
  return config;
}

Clocks figure_1(const DramConfig& config) {
  Channel dram(config);
  dram.read(place(0, 0, 9));
  dram.read(place(0, 1, 9));
  dram.finish();
  dram.pass(100);
  const Clocks start = dram.now;
  Clocks end = 0;
  const unsigned references[8][3] = {{0, 0, 0}, {0, 1, 0}, {0, 0, 1}, {0, 1, 3},
                                     {1, 0, 0}, {1, 1, 1}, {1, 0, 1}, {1, 1, 2}};  // bank, row, column
  for (const auto& reference : references) dram.read(place(0, reference[0], reference[1], reference[2]));
  dram.finish();
  for (const DramCompletion& one : dram.done) end = std::max(end, one.done);
  return end - start;
}

}  // namespace

// S. Rixner et al., Memory Access Scheduling, ISCA 2000, figure 1 (values from memory).
TEST_CASE("eight references take 56 clocks in order and 19 scheduled", "[dram][outside]") {
  DramConfig config = toy();
  config.scheduling = DramScheduling::one_at_a_time;
  CHECK(figure_1(config) == 56);
  config.scheduling = DramScheduling::first_ready;
  config.row_first = true;
  CHECK(figure_1(config) == 19);
  config.row_first = false;
  CHECK(figure_1(config) == 20);
}

// hit CL, closed tRCD + CL, conflict tRP + tRCD + CL; the last beat BL/2 later.
TEST_CASE("an idle device answers after exactly the clocks of a hit, a closed bank and a conflict",
          "[dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const DramConfig config = config_of(name);
    const Grade& g = config.grade;
    Channel dram(config);
    dram.now = 1000;
    const unsigned closed = dram.read(place(0, 1, 5));
    dram.go_to(2000);
    const unsigned hit = dram.read(place(0, 1, 5, 3));
    dram.go_to(3000);
    const unsigned conflict = dram.read(place(0, 1, 6));
    dram.go_to(4000);
    CHECK(dram.done_at(closed) == 1000 + g.trcd + g.cl + g.burst_clocks());
    CHECK(dram.done_at(hit) == 2000 + g.cl + g.burst_clocks());
    CHECK(dram.done_at(conflict) == 3000 + g.trp + g.trcd + g.cl + g.burst_clocks());
    require_legal(dram.log(), config);
    const DramCounts counts = dram.channel.counts(4000);
    CHECK(counts.row_closed == 1);
    CHECK(counts.row_hits == 1);
    CHECK(counts.row_conflicts == 1);
    CHECK(counts.activates == 2);
    CHECK(counts.precharges == 1);
    CHECK(counts.rank_clocks_active == 3000 - g.trp);
    CHECK(counts.rank_clocks_precharged == 1000 + g.trp);
  }
}

TEST_CASE("a row opened lately is closed after tRAS, tRTP after its read, and tWR after its write",
          "[dram]") {
  const DramConfig config = config_of("ddr4-2400t");
  const Grade& g = config.grade;
  for (const bool write : {false, true}) {
    Channel dram(config);
    dram.ask(write, place(0, 0, 1));
    dram.pass(g.trcd);  // its column command goes now
    dram.read(place(0, 0, 2));
    dram.finish();
    const Clocks column = dram.clocks_of(write ? DramCommand::write : DramCommand::read).front();
    CHECK(column == g.trcd);
    const Clocks recovered = column + (write ? g.cwl + g.burst_clocks() + g.twr : g.trtp);
    CHECK(dram.clocks_of(DramCommand::precharge).front() == std::max<Clocks>(g.tras, recovered));
    CHECK(dram.clocks_of(DramCommand::activate).back() == std::max<Clocks>(g.trc, recovered + g.trp));
  }
}

TEST_CASE("column commands are spaced by group, direction and rank", "[dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    DramConfig config = config_of(name);
    config.ranks = 2;
    config.scheduling = DramScheduling::first_come;
    const Grade& g = config.grade;
    const unsigned other_group = g.bank_groups > 1 ? 1 : 0;
    // Opens rows, then two column commands; the clocks between these.
    const auto spacing = [&](bool write1, const DramPlace& first, bool write2, const DramPlace& second) {
      Channel dram(config);
      dram.read(first);
      dram.read(second);
      dram.go_to(1000);
      DramPlace a = first, b = second;
      a.column = b.column = 1;
      dram.ask(write1, a);
      dram.ask(write2, b);
      dram.finish();
      require_legal(dram.log(), config);
      const std::vector<CommandRecord>& log = dram.log();
      return log[log.size() - 1].clock - log[log.size() - 2].clock;
    };
    const DramPlace here = place(0, 0, 1), beside = place(0, 1, 1), there = place(other_group, 2, 1);
    const DramPlace far = place(0, 0, 1, 0, 1);
    const Clocks data = g.burst_clocks() + g.rank_switch;
    CHECK(spacing(false, here, false, beside) == g.tccd_l);
    CHECK(spacing(false, here, false, there) == g.tccd_s);
    CHECK(spacing(true, here, true, beside) == (g.tccd_l_wr != 0 ? g.tccd_l_wr : g.tccd_l));
    CHECK(spacing(true, here, true, there) == g.tccd_s);
    CHECK(spacing(false, here, true, there) == g.read_to_write);
    CHECK(spacing(true, here, false, beside) == g.write_to_read_l());
    CHECK(spacing(true, here, false, there) == g.write_to_read_s());
    CHECK(spacing(false, here, false, far) == data);
    CHECK(spacing(true, here, true, far) == data);
    CHECK(spacing(false, here, true, far) == g.cl + data - g.cwl);
    CHECK(spacing(true, here, false, far) ==
          std::max<Clocks>(1, g.cwl + data > g.cl ? g.cwl + data - g.cl : 0));
  }
}

namespace {

// A saturated read queue for `bursts` bursts, the n-th to place_of(n); the clocks between the first data and
// the last.
template <typename PlaceOf>
Clocks saturate(Channel& dram, unsigned bursts, PlaceOf place_of, bool write = false) {
  for (unsigned n = 0; n < bursts;) {
    while (n < bursts && dram.channel.accepts(write)) dram.ask(write, place_of(n++));
    if (dram.channel.next_event() != DramChannel::never) dram.go_to(dram.channel.next_event());
  }
  dram.finish();
  require_legal(dram.log(), dram.config);
  CHECK(dram.channel.broken_laws(dram.now).empty());
  const auto columns = dram.clocks_of(write ? DramCommand::write : DramCommand::read);
  REQUIRE(columns.size() == bursts);
  return columns.back() - columns.front();
}

}  // namespace

TEST_CASE("a stream over the bank groups keeps the data bus busy; in one group tCCD_L bounds it", "[dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const DramConfig config = config_of(name);
    const Grade& g = config.grade;
    Channel spread(config);
    CHECK(saturate(spread, 200, [&](unsigned n) {
            return place(n % g.bank_groups, 0, 1, n / g.bank_groups % 64);
          }) <= 199 * g.tccd_s + g.tccd_l * g.bank_groups);
    Channel narrow(config);
    CHECK(saturate(narrow, 60, [&](unsigned n) { return place(0, 0, 1, n); }) == 59 * g.tccd_l);
  }
}

TEST_CASE("activations alone are bounded by tFAW, or tRRD, or in one bank by tRC", "[dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    const DramConfig config = config_of(name);
    const Grade& g = config.grade;
    Channel one_bank(config);
    saturate(one_bank, 40, [](unsigned n) { return place(0, 0, n); });
    const auto single = one_bank.clocks_of(DramCommand::activate);
    CHECK(single.back() - single.front() == 39 * std::max(g.trc, std::max(g.tras, g.trcd + g.trtp) + g.trp));
    Channel all_banks(config);
    saturate(all_banks, 400, [&](unsigned n) {
      return place(n % g.bank_groups, n / g.bank_groups % g.banks_per_group, n / g.banks());
    });
    const auto many = all_banks.clocks_of(DramCommand::activate);
    const Clocks bound = std::max({g.tfaw, 4 * g.trrd_s, 4 * g.trc / g.banks()});
    CHECK((many.back() - many.front()) * 4 >= (many.size() - 4) * bound);
    CHECK((many.back() - many.front()) * 4 <= (many.size() + 20) * bound * 5 / 4);
  }
}

TEST_CASE("a bank asked for two rows in turn opens each once when reordered, and every time in order",
          "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  const auto activates = [&] {
    Channel dram(config);
    for (unsigned n = 0; n < 32; ++n) dram.read(place(0, 0, n % 2, n));
    dram.finish();
    require_legal(dram.log(), config);
    return dram.channel.counts(dram.now).activates;
  };
  config.scheduling = DramScheduling::first_come;
  CHECK(activates() == 32);
  config.scheduling = DramScheduling::first_ready;
  CHECK(activates() == 2);
  config.age_cap = 1;
  CHECK(activates() == 32);
}

TEST_CASE("hits overtake an older row only until that is over age", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.age_cap = 500;
  Channel dram(config);
  dram.read(place(0, 0, 1));
  dram.pass(1);
  const unsigned old = dram.read(place(0, 0, 2));
  std::uint64_t column = 1;
  while (dram.now < 2000) {
    while (dram.channel.accepts(false)) dram.read(place(0, 0, 1, column++ % 100));
    dram.pass(4);
  }
  const Grade& g = config.grade;
  CHECK(dram.done_at(old) > 500);
  CHECK(dram.done_at(old) <= 1 + 500 + g.trtp + g.trp + g.trcd + g.cl + g.burst_clocks() + 2);
  CHECK(dram.channel.counts(dram.now).over_age > 0);
}

TEST_CASE("writes wait for the high mark and are served down to the low one, or until a read comes",
          "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.write_high = 8;
  config.write_low = 3;
  Channel dram(config);
  for (unsigned n = 0; n < 8; ++n) dram.write(place(n % 4, 0, 1, n));
  for (unsigned n = 0; n < 30; ++n) dram.read(place(n % 4, 1, 1, n));
  dram.finish();
  std::string turns;
  for (const CommandRecord& record : dram.log())
    if (record.command == DramCommand::read || record.command == DramCommand::write)
      turns += record.command == DramCommand::read ? 'r' : 'w';
  CHECK(turns == std::string(5, 'w') + std::string(30, 'r') + std::string(3, 'w'));
  CHECK(dram.channel.counts(dram.now).write_drains == 1);
}

// n reads and n writes in turns cost the bus turnaround once each way: the share of data is n BL / (n BL +
// P).
TEST_CASE("the turnaround between reads and writes costs what their spacing says", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.write_high = 16;
  config.write_low = 0;
  const Grade& g = config.grade;
  Channel dram(config);
  for (unsigned n = 0; n < 32; ++n) dram.read(place(n % 4, 0, 1, n));  // opens the rows
  dram.go_to(1000);
  for (unsigned n = 0; n < 16; ++n) dram.read(place(n % 4, 0, 1, n));
  dram.pass(1);
  for (unsigned n = 0; n < 15; ++n) dram.write(place(n % 4, 0, 1, 32 + n));
  dram.finish();
  const auto reads = dram.clocks_of(DramCommand::read);
  const auto writes = dram.clocks_of(DramCommand::write);
  CHECK(writes.front() - reads.back() == g.read_to_write);
  CHECK(writes.back() - writes.front() == 14 * g.tccd_s);
}

TEST_CASE("a read is served from a queued write that has all its bytes, and writes of one burst merge",
          "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  Channel dram(config);
  dram.read(place(0, 0, 7));  // writes wait while there is a read
  const auto part = [&](bool write, unsigned first, unsigned last) {
    DramBurst burst;
    burst.id = dram.ids++;
    burst.write = write;
    burst.number = 99;
    burst.place = place(0, 1, 1);
    burst.first = first;
    burst.last = last;
    dram.channel.enqueue(burst, dram.now, dram.done);
    return burst.id;
  };
  const auto served = [&](unsigned id) { return dram.done.back().id == id; };
  CHECK(served(part(true, 0, 16)));
  CHECK_FALSE(served(part(false, 0, 17)));
  CHECK(served(part(false, 4, 16)));
  CHECK(dram.done.back().done == 1);
  part(true, 16, 32);
  CHECK(served(part(false, 8, 24)));
  part(true, 40, 41);  // apart from the rest: not remembered
  CHECK_FALSE(served(part(false, 40, 41)));
  CHECK(served(part(false, 0, 32)));
  dram.finish();
  const DramCounts counts = dram.channel.counts(dram.now);
  CHECK(counts.writes_merged == 2);
  CHECK(counts.reads_from_queue == 3);
  CHECK(counts.write_bursts == 1);
  CHECK(counts.read_bursts == 3);
}

TEST_CASE("a write does not go to the banks before an older read of its burst", "[dram]") {
  for (const DramScheduling scheduling : {DramScheduling::first_come, DramScheduling::first_ready}) {
    DramConfig config = config_of("ddr4-2400t");
    config.scheduling = scheduling;
    config.write_high = 2;
    config.write_low = 0;
    Channel dram(config);
    dram.read(place(0, 0, 1));
    dram.write(place(0, 1, 2));
    dram.read(place(0, 1, 2));  // served from the queue
    DramBurst part;             // but this one has bytes that are not
    part.id = dram.ids++;
    part.number = ((0 * 64 + 0 * 8 + 1) * config.grade.rows + 2) * 4096 + 0;
    part.place = place(0, 1, 2);
    part.last = config.burst_bytes() + 1;
    dram.channel.enqueue(part, dram.now, dram.done);
    dram.write(place(0, 1, 2));  // merges, and is younger than that
    dram.write(place(1, 0, 3));  // the high mark
    dram.finish();
    std::vector<DramCommand> order;
    for (const CommandRecord& record : dram.log())
      if (record.bank == 1 && (record.command == DramCommand::read || record.command == DramCommand::write))
        order.push_back(record.command);
    CHECK(order == std::vector<DramCommand>{DramCommand::read, DramCommand::write});
    CHECK(dram.channel.counts(dram.now).write_bursts == 2);
  }
}

TEST_CASE("closed rows close with their last queued access; idle rows after the timeout", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  const Grade& g = config.grade;
  config.rows = DramRows::closed;
  Channel closed(config);
  closed.read(place(0, 0, 1, 0));
  closed.read(place(0, 0, 1, 1));
  closed.write(place(0, 0, 1, 2));
  closed.finish();
  CHECK(closed.clocks_of(DramCommand::read).size() == 2);
  CHECK(closed.clocks_of(DramCommand::write_precharge).size() == 1);
  closed.go_to(1000);
  const unsigned again = closed.read(place(0, 0, 1, 3));
  closed.finish();
  CHECK(closed.done_at(again) == 1000 + g.trcd + g.cl + g.burst_clocks());
  require_legal(closed.log(), config);

  config.rows = DramRows::idle_timeout;
  config.idle_timeout = 300;
  Channel idle(config);
  idle.read(place(0, 0, 1));
  idle.finish();
  idle.go_to(g.trcd + 300);  // at the timeout the request is first
  const unsigned in_time = idle.read(place(0, 0, 2));
  idle.finish();
  CHECK(idle.done_at(in_time) == g.trcd + 300 + g.trp + g.trcd + g.cl + g.burst_clocks());
  idle.go_to(5000);
  const unsigned late = idle.read(place(0, 0, 3));
  idle.finish();
  CHECK(idle.done_at(late) == 5000 + g.trcd + g.cl + g.burst_clocks());
  require_legal(idle.log(), config);
}

// 8192 refreshes in 64 ms (DDR5: 32 ms), with tREFI rounded down to clocks and printed with two digits.
TEST_CASE("an idle device is refreshed every tREFI, with and without a log", "[dram][outside]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    for (const bool log : {true, false}) {
      DramConfig config = config_of(name);
      config.refresh = DramRefresh::all_bank;
      config.ranks = 2;
      config.log_commands = log;
      Channel dram(config);
      const Clocks end = config.grade.trefi * Clocks{1000} + 1;
      dram.read(place(0, 0, 1));
      dram.finish();
      dram.now = end;
      CHECK(dram.channel.next_event() == DramChannel::never);
      const DramCounts counts = dram.channel.counts(end);
      CHECK(counts.refreshes == 2 * 1000);
      CHECK(counts.most_postponed == 1);
      CHECK(counts.rank_clocks_active == config.grade.trefi - config.grade.trefi * 0 / 2);
      if (log) require_legal(dram.log(), config, end);
    }
  }
}

TEST_CASE("a request that comes during a refresh waits for its end", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.refresh = DramRefresh::all_bank;
  const Grade& g = config.grade;
  const Clocks read = g.trcd + g.cl + g.burst_clocks();
  Channel dram(config);
  dram.now = g.trefi + 100;
  const unsigned during = dram.read(place(0, 0, 1));
  dram.finish();
  CHECK(dram.done_at(during) == g.trefi + g.trfc + read);
  dram.now = 2 * g.trefi + 5;  // the row was open, so its precharge comes first
  const unsigned begun = dram.read(place(0, 0, 1));
  dram.finish();
  CHECK(dram.done_at(begun) == 2 * g.trefi + g.trp_all + g.trfc + read);
}

TEST_CASE("under load 8 refreshes are postponed and never more than 9 tREFI lie between two",
          "[dram][outside]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    DramConfig config = config_of(name);
    config.refresh = DramRefresh::all_bank;
    const Grade& g = config.grade;
    Channel dram(config);
    std::mt19937_64 random(5);  // seed 5
    const Clocks end = 40 * Clocks{g.trefi};
    while (dram.now < end) {
      while (dram.channel.accepts(false))
        dram.read(place(below(random, g.bank_groups), below(random, g.banks_per_group), random() % 4,
                        random() % 32));
      dram.go_to(dram.channel.next_event());
    }
    dram.finish();
    require_legal(dram.log(), config, dram.now);
    Clocks last = 0, widest = 0;
    for (const Clocks clock : dram.clocks_of(DramCommand::refresh)) {
      widest = std::max(widest, clock - last);
      last = clock;
    }
    CHECK(widest <= 9 * Clocks{g.trefi});
    CHECK(widest >= 9 * Clocks{g.trefi} - 300);
    CHECK(dram.channel.counts(dram.now).most_postponed == 8);
  }
}

TEST_CASE("banks are refreshed one by one where the standard has that", "[dram]") {
  DramConfig config = config_of("lpddr4-3200");
  config.refresh = DramRefresh::per_bank;
  const Grade& g = config.grade;
  Channel dram(config);
  dram.now = g.trefi_bank + 20;
  const unsigned other = dram.read(place(0, 1, 1));
  dram.finish();
  CHECK(dram.done_at(other) == g.trefi_bank + 20 + g.trcd + g.cl + g.burst_clocks());
  dram.now = 3 * g.trefi_bank + 20;
  const unsigned same = dram.read(place(0, 2, 1));
  dram.finish();
  CHECK(dram.done_at(same) == 3 * g.trefi_bank + g.trfc_bank + g.trcd + g.cl + g.burst_clocks());
  require_legal(dram.log(), config, dram.now);
  CHECK(dram.channel.counts(g.trefi * Clocks{100} + 1).bank_refreshes ==
        Clocks{g.trefi} * 100 / g.trefi_bank);
}

TEST_CASE("whatever is asked in whatever order: every log is legal, every read completes, every law holds",
          "[dram]") {
  std::mt19937_64 random(2024);  // seed 2024
  for (unsigned run = 0; run < 240; ++run) {
    const auto& names = builtin_grades();
    DramConfig config = config_of(names[run % names.size()]);
    const Grade& g = config.grade;
    config.ranks = 1 + below(random, 4);
    config.scheduling = static_cast<DramScheduling>(below(random, 8) < 6 ? 2 : below(random, 2));
    config.row_first = below(random, 4) == 0;
    config.age_cap = below(random, 3) == 0 ? 1 + below(random, 300) : 2000;
    config.rows = static_cast<DramRows>(below(random, 3));
    config.idle_timeout = below(random, 400);
    config.refresh = static_cast<DramRefresh>(below(random, 4) == 0 ? 2 : below(random, 2));
    if (config.refresh == DramRefresh::per_bank && g.trefi_bank == 0) config.refresh = DramRefresh::all_bank;
    config.read_queue = 1 + below(random, 40);
    config.write_queue = 1 + below(random, 40);
    config.write_high = 1 + below(random, config.write_queue);
    config.write_low = below(random, config.write_high);
    INFO("run " << run << ", " << g.name << ", ranks " << config.ranks << ", scheduling "
                << static_cast<int>(config.scheduling) << ", rows " << static_cast<int>(config.rows)
                << ", refresh " << static_cast<int>(config.refresh));
    const std::uint64_t rows = 1 + below(random, 5), columns = 1 + below(random, 20);
    const unsigned writes = below(random, 101), pause = below(random, 3);

    Channel dram(config);
    std::vector<unsigned> reads;
    for (unsigned n = 0; n < 1500; ++n) {
      const bool write = below(random, 100) < writes;
      while (!dram.channel.accepts(write)) dram.go_to(dram.channel.next_event());
      const unsigned id =
          dram.ask(write, place(below(random, g.bank_groups), below(random, g.banks_per_group),
                                random() % rows, random() % columns, below(random, config.ranks)));
      if (!write) reads.push_back(id);
      if (pause == 0) dram.pass(below(random, 100));
      if (pause == 1 && below(random, 200) == 0) dram.pass(below(random, 5 * g.trefi));
    }
    dram.finish();
    require_legal(dram.log(), config, dram.now);
    std::map<unsigned, Clocks> done;
    for (const DramCompletion& one : dram.done) done[one.id] = one.done;
    CHECK(std::all_of(reads.begin(), reads.end(), [&](unsigned id) { return done.count(id) == 1; }));
    CHECK(dram.done.size() == 1500);
    CHECK(dram.channel.broken_laws(dram.now).empty());
    CHECK(dram.channel.pending().empty());
    const DramCounts counts = dram.channel.counts(dram.now);
    CHECK(counts.read_bursts + counts.reads_from_queue == reads.size());
    CHECK(counts.write_bursts + counts.writes_merged + reads.size() == 1500);
    CHECK(counts.row_hits + counts.row_closed + counts.row_conflicts ==
          counts.read_bursts + counts.write_bursts);
    CHECK(counts.rank_clocks_active + counts.rank_clocks_precharged == dram.now * config.ranks);
  }
}

TEST_CASE("one read at a time: the estimate is the scheduler's time, to the clock but for refresh",
          "[dram]") {
  for (const std::string& name : builtin_grades()) {
    INFO(name);
    DramConfig config = config_of(name);
    config.ranks = 2;
    config.log_commands = false;
    const Grade& g = config.grade;
    std::mt19937_64 random(3);  // seed 3
    for (const DramRefresh refresh : {DramRefresh::off, DramRefresh::all_bank}) {
      config.refresh = refresh;
      Channel dram(config);
      DramEstimate estimate(config);
      Clocks scheduled = 0, estimated = 0;
      unsigned different = 0;
      for (unsigned n = 0; n < 20000; ++n) {
        const DramPlace where = place(below(random, g.bank_groups), below(random, 2), random() % 2,
                                      random() % 8, below(random, 2));
        const unsigned id = dram.read(where);
        const Clocks start = dram.now, done = estimate.access(where, false, start).done;
        dram.finish();
        estimated += done - start;
        scheduled += dram.done_at(id) - start;
        if (done != dram.done_at(id)) ++different;
        dram.now = std::max(dram.now, dram.done_at(id) + random() % 50);
        estimate.forget_before(dram.now);
        dram.done.clear();
      }
      // Whether a request that meets a refresh by a clock is before or after it, they do not always agree.
      CHECK(different <= (refresh == DramRefresh::off ? 0u : 400u));
      CHECK(static_cast<double>(estimated) == Approx(static_cast<double>(scheduled)).epsilon(0.02));
    }
  }
}

TEST_CASE("an address map and its inverse agree, and every burst has a place of its own", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.grade.rows = 6;  // no power of two, and small enough to try them all
  config.grade.page_bytes = 64;
  config.ranks = 2;
  config.channels = 2;
  for (const char* map :
       {"row rank bank column group channel", "row:1 row column:2 bank rank channel group column"}) {
    for (const bool hash : {false, true}) {
      config.address_map = map;
      config.hash_banks = hash;
      REQUIRE(config.problems() == config.grade.problems());
      const DramAddressMap addresses(config);
      std::map<std::vector<std::uint64_t>, std::uint64_t> taken;
      for (std::uint64_t burst = 0; burst < config.bytes() / config.burst_bytes(); ++burst) {
        const DramPlace p = addresses.place(burst);
        REQUIRE((p.channel < 2 && p.rank < 2 && p.group < 4 && p.bank < 4 && p.row < 6 && p.column < 8));
        REQUIRE(taken.insert({{p.channel, p.rank, p.group, p.bank, p.row, p.column}, burst}).second);
        REQUIRE(addresses.burst(p) == burst);
      }
    }
  }
}

TEST_CASE("an address map is refused with what is wrong with it", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  config.ranks = 2;
  const auto problem = [&](const char* map) {
    config.address_map = map;
    const std::vector<std::string> all = config.problems();
    return all.empty() ? "" : all.front().substr(all.front().find("\": ") + 3);
  };
  CHECK(problem("row rank bank group column") == "");  // one channel
  CHECK(problem("row bank group column channel") == "it misses rank, of which there are 2");
  CHECK(problem("row rank bank group column column") == "it repeats column");
  CHECK(problem("row rank bank group column:3") == "3 bits of column instead of 7");
  CHECK(problem("row rank bank group column:0") ==
        "\"column:0\" has no number of bits; expected for example \"column:2\"");
  CHECK(problem("row rank bank group colunm") ==
        "\"colunm\" is no field; expected row, rank, bank, group, column or channel");
  config.channels = 3;
  CHECK(problem("row rank bank group column channel") ==
        "3 channels are no power of two, so channel must come first");
  CHECK(problem("channel row rank bank group column") == "");
}

TEST_CASE("what is pending is said with its head and what that waits for", "[dram]") {
  DramConfig config = config_of("ddr4-2400t");
  Channel dram(config);
  CHECK(dram.channel.pending().empty());
  dram.read(place(1, 2, 33, 4));
  dram.pass(3);
  dram.write(place(0, 0, 1));
  const std::vector<std::string> lines = dram.channel.pending();
  REQUIRE(lines.size() == 2);
  CHECK(lines[0] ==
        "channel 0, read queue: 1 of 32 bursts; the head, rank 0 group 1 bank 2 row 33 column 4, is there "
        "since "
        "clock 0 and waits for RD, possible from clock 17");
  CHECK(lines[1].find(
            "channel 0, write queue: 1 of 32 bursts; the head, rank 0 group 0 bank 0 row 1 column 0, is "
            "there since clock 3 and waits for ACT") == 0);
}
