// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The arbitrated bus as a server, against queueing theory; queueing_station.h says how it is made one. The
// theorems are from L. Kleinrock, "Queueing Systems", volumes 1 (1975) and 2 (1976), and J. D. C. Little,
// Operations Research 9(3), 1961; the sections named beside each are values from memory, the numbers are
// worked out from the formulas.
#include <array>

#include "queueing_station.h"

using namespace earshot;
using namespace earshot::test::queueing;

// ---- Open queues

namespace {

// M/D/1, fixed service: Wq = rho S / (2 (1 - rho)). Kleinrock 1, section 5.6 (Pollaczek and Khinchine).
void fixed_service(double utilisation, std::uint64_t jobs, double narrow) {
  constexpr int ports = 8;
  Station station("station", ports, Arbitration::first_come);
  station.poisson(utilisation / ports, jobs);
  sc_core::sc_start();
  REQUIRE(station.log.size() == jobs);
  check(batch_means(waits(station.log)), utilisation / (2 * (1 - utilisation)), narrow);
  CHECK(station.bus.totals().address_busy == jobs * S);  // the utilisation law: busy = completions x S
  station.check_laws();
}

// M/M/1, exponential service: Wq = rho S / (1 - rho), twice as long. Kleinrock 1, section 3.2.
void exponential_service(double utilisation, std::uint64_t jobs, double narrow) {
  constexpr int ports = 8;
  Station station("station", ports, server_config(arbiter_of(Arbitration::first_come)),
                  Exponential(static_cast<double>(S - bus_cycles), 100));
  station.poisson(utilisation / ports, jobs);
  sc_core::sc_start();
  check(batch_means(responses(station.log)), 1 / (1 - utilisation), narrow);
  CHECK(station.bus.totals().address_busy == station.drawn->busy_time() + jobs * bus_cycles);
  station.check_laws();
}

}  // namespace

TEST_CASE("Poisson arrivals at utilisation 0.25 wait as Pollaczek and Khinchine say: S/6", "[outside]") {
  fixed_service(0.25, 800000, 0.02);
}
TEST_CASE("Poisson arrivals at utilisation 0.5 wait as Pollaczek and Khinchine say: S/2", "[outside]") {
  fixed_service(0.5, 600000, 0.02);
}
TEST_CASE("Poisson arrivals at utilisation 0.7 wait as Pollaczek and Khinchine say: 7S/6", "[outside]") {
  fixed_service(0.7, 1000000, 0.03);
}
TEST_CASE("Poisson arrivals at utilisation 0.8 wait as Pollaczek and Khinchine say: 2S", "[outside]") {
  fixed_service(0.8, 1600000, 0.04);
}
TEST_CASE("Poisson arrivals at utilisation 0.9 wait as Pollaczek and Khinchine say: 4.5S", "[outside]") {
  fixed_service(0.9, 3200000, 0.06);
}

TEST_CASE("with exponential service at utilisation 0.5 the response takes 2S", "[outside]") {
  exponential_service(0.5, 800000, 0.03);
}
TEST_CASE("with exponential service at utilisation 0.75 the response takes 4S", "[outside]") {
  exponential_service(0.75, 1600000, 0.06);
}

// D. V. Lindley, "The theory of queues with a single server", Proc. Cambridge Philosophical Society 48, 1952:
// a job starts when it has come and the one before has gone.
TEST_CASE("first come, first served follows Lindley's recursion to the picosecond", "[outside]") {
  constexpr int ports = 4;
  Station station("station", ports, Arbitration::first_come);
  station.poisson(0.8 / ports, 200000);
  sc_core::sc_start();
  std::array<Picoseconds, ports> wait{}, longest{};
  std::array<std::uint64_t, ports> grants{};
  Picoseconds free = 0;
  for (const Served& job : station.in_order_of_asking()) {
    free = std::max(free, job.asked) + S;
    REQUIRE(job.asked + job.response == free);
    const auto port = static_cast<std::size_t>(job.port);
    ++grants[port];
    wait[port] += job.response - S;
    longest[port] = std::max(longest[port], job.response - S);
  }
  for (std::size_t port = 0; port < ports; ++port) {
    const BusPortTotals totals = station.bus.totals().ports[port];
    CHECK(totals.grants == grants[port]);
    CHECK(totals.wait == wait[port]);
    CHECK(totals.longest_wait == longest[port]);
  }
  station.check_laws();
}

namespace {

// Clock edges are waited for here, before the grant and by the data.
struct Tandem {
  const char* slowest;
  unsigned arbitration, address;  // cycles
  Picoseconds memory;             // reads only: it takes writes at once
  unsigned width, turnaround;     // bytes, of 8; cycles
  std::uint64_t write_every;      // so many jobs of a customer; 0: never
};
constexpr Picoseconds clock_period = 5000;

Picoseconds data_time(const Tandem& row) {
  return (8 / row.width + row.turnaround) * clock_period;
}

std::unique_ptr<Station> start(const Tandem& row) {
  SnoopingBusConfig config = server_config(arbiter_of(Arbitration::first_come));
  config.structure = BusStructure::split;
  config.clock = from_ps(clock_period);
  config.width_bytes = row.width;
  config.address_cycles = row.address;
  config.arbitration_cycles = row.arbitration;
  config.turnaround_cycles = row.turnaround;
  config.outstanding = 100000;
  constexpr int customers = 40;  // one a port, for a port has one uncached access under way
  auto station =
      std::make_unique<Station>(std::string("slowest_") + row.slowest, customers, config, row.memory);
  const auto slowest =
      static_cast<double>(std::max({row.address * clock_period, row.memory, data_time(row)}));
  for (int port = 0; port < customers; ++port) {
    Jobs& jobs =
        station->jobs(port, Exponential(slowest * customers, static_cast<std::uint64_t>(port)), 2000);
    jobs.write_every(row.write_every);
    jobs.closed(1);
  }
  return station;
}

// What should happen: when each job has its last beat or, a write, has left the data bus; and the sums of
// waits.
struct Course {
  std::vector<Picoseconds> ends;
  Picoseconds for_grant = 0, for_data_bus = 0;
};
Course course_of(const Log& in_order_of_asking, const Tandem& row) {
  Course course;
  std::vector<std::pair<Picoseconds, std::size_t>>
      transfers;  // ready, job: at once ready, the first granted goes first
  Picoseconds address_free = 0, memory_free = 0, data_free = 0;
  for (const Served& job : in_order_of_asking) {
    const Picoseconds ready = next_edge(job.asked, clock_period) + row.arbitration * clock_period;
    const Picoseconds granted = std::max(address_free, ready);
    course.for_grant += granted - job.asked;
    address_free = granted + row.address * clock_period;
    if (!job.write) memory_free = std::max(memory_free, address_free) + row.memory;
    transfers.emplace_back(job.write ? address_free : next_edge(memory_free, clock_period), transfers.size());
  }
  std::sort(transfers.begin(), transfers.end());
  course.ends.resize(transfers.size());
  for (const auto& [ready, job] : transfers) {
    const Picoseconds start = std::max(data_free, ready);
    course.for_data_bus += start - ready;
    data_free = start + data_time(row);
    course.ends[job] = data_free - row.turnaround * clock_period;  // the turnaround is nobody's time
  }
  return course;
}

}  // namespace

TEST_CASE("on a split bus address bus, memory and data bus are three queues in a row, to the picosecond",
          "[outside]") {
  const std::vector<Tandem> rows = {{"address", 0, 9, 40000, 4, 0, 0},
                                    {"memory", 1, 2, 60000, 2, 0, 0},
                                    {"data", 2, 3, 41234, 1, 1, 0},
                                    {"data_after_long_arbitration", 6, 1, 1000, 4, 1, 0},
                                    {"memory_overtaken_by_writes", 1, 2, 60000, 2, 1, 3},
                                    {"data_some_written", 2, 1, 21000, 1, 0, 2}};
  std::vector<std::unique_ptr<Station>> stations;
  for (const Tandem& row : rows) stations.push_back(start(row));
  sc_core::sc_start();
  for (std::size_t i = 0; i < rows.size(); ++i) {
    INFO("slowest: " << rows[i].slowest);
    const Log log = stations[i]->in_order_of_asking();
    REQUIRE(log.size() == 80000);
    const Course course = course_of(log, rows[i]);
    for (std::size_t job = 0; job < log.size(); ++job)
      REQUIRE(log[job].asked + log[job].response == course.ends[job]);
    CHECK(stations[i]->stayed("requests") == Approx(static_cast<double>(course.for_grant)).epsilon(1e-12));
    CHECK(stations[i]->stayed("data bus") == Approx(static_cast<double>(course.for_data_bus)).epsilon(1e-12));
    CHECK(stations[i]->bus.totals().data_busy == log.size() * data_time(rows[i]));
    stations[i]->check_laws();
  }
}

// ---- Arbiters

// With equal service times the sum of waits over a busy period is the same in any order that leaves no gaps:
// hence Kleinrock's conservation law (volume 2, section 3.4), here without any statistics.
TEST_CASE("every arbiter that does not look at service times has the same mean wait", "[outside]") {
  constexpr int ports = 4;
  std::vector<std::unique_ptr<Station>> stations;
  for (const Arbitration kind : service_blind)
    stations.push_back(std::make_unique<Station>("station" + number(kind), ports, kind));
  ArbiterConfig slots = arbiter_of(Arbitration::time_slots);
  slots.slot_cycles = 2 * S;
  Station slotted("slotted", ports, server_config(slots), S - bus_cycles);
  for (const auto& station : stations) station->poisson(0.8 / ports, 60000);
  slotted.poisson(0.3 / ports, 60000);
  sc_core::sc_start();
  const double first_come = stations.front()->total_response();
  CHECK(first_come > 0);
  for (const auto& station : stations) {
    INFO(station->bus.name());
    CHECK(station->total_response() == first_come);  // sums of integers below 2^53
    station->check_laws();
    if (station != stations.front()) {  // and yet they are different orders
      const auto same = [](const Served& a, const Served& b) {
        return a.port == b.port && a.asked == b.asked;
      };
      CHECK_FALSE(std::equal(station->log.begin(), station->log.end(), stations.front()->log.begin(), same));
    }
  }
  // Time slots leave gaps: more than M/D/1's wait.
  CHECK(in_S(slotted.total_response()) / 60000 - 1 > 2 * 0.3 / (2 * 0.7));
  for (const Served& job : slotted.log) {
    const Picoseconds start = job.asked + job.response - S;
    REQUIRE(start / (2 * S) % ports == static_cast<Picoseconds>(job.port));
  }
  slotted.check_laws();
}

// A. Cobham, Operations Research 2, 1954; Kleinrock 2, section 3.2: W_p = W_0 / ((1 - s_(p-1)) (1 - s_p))
// with s_p the utilisation by classes 1 to p, here W_0 = 0.4: 0.4 / 0.6 and 0.4 / (0.6 x 0.2).
TEST_CASE("two classes of fixed priority, 0.4 each, wait 0.6667 S and 3.3333 S as Cobham says", "[outside]") {
  constexpr std::uint64_t jobs = 3200000;
  Station station("station", 2, Arbitration::fixed_priority);
  station.poisson(0.4, jobs);
  sc_core::sc_start();
  check(batch_means(waits(station.log, 0)), 2.0 / 3, 0.02);
  check(batch_means(waits(station.log, 1)), 10.0 / 3, 0.06);
  check(batch_means(waits(station.log)), 2, 0.06);  // together as without classes
  station.check_laws();
}

TEST_CASE("a burst of n waits 0, S, 2S, ... under every arbiter", "[outside]") {
  std::vector<std::unique_ptr<Station>> stations;
  for (const Arbitration kind : service_blind)
    for (int n = 1; n <= 8; ++n)
      for (const bool blocking : {false, true}) {
        stations.push_back(std::make_unique<Station>(
            "burst" + number(kind) + "_" + std::to_string(n) + (blocking ? "b" : "n"), n, kind));
        for (int port = 0; port < n; ++port)
          stations.back()->customer(
              blocking, port, [] { return 5 * S; }, 1);
      }
  Station one_port("one_port", 1, Arbitration::first_come);  // all through one port
  one_port
      .jobs(
          0, [] { return 5 * S; }, 8)
      .closed(8);
  sc_core::sc_start();
  const auto check_burst = [](Station& station) {
    INFO(station.bus.name());
    for (std::size_t i = 0; i < station.log.size(); ++i) {
      CHECK(station.log[i].asked == 5 * S);
      CHECK(station.log[i].response == (i + 1) * S);
    }
    station.check_laws();
  };
  for (const auto& station : stations) check_burst(*station);
  REQUIRE(one_port.log.size() == 8);
  check_burst(one_port);
}

TEST_CASE("round robin gives n saturating ports 1/n of the bus each and no wait above (n-1)S", "[outside]") {
  std::vector<std::unique_ptr<Station>> stations;
  for (int n = 1; n <= 8; ++n)
    for (const bool blocking : {false, true}) {
      stations.push_back(std::make_unique<Station>("round" + std::to_string(n) + (blocking ? "b" : "n"), n,
                                                   Arbitration::round_robin));
      for (int port = 0; port < n; ++port)
        stations.back()->customer(
            blocking, port, [] { return Picoseconds{0}; }, for_ever);
    }
  sc_core::sc_start(from_ps(840 * S + 1));
  for (const auto& station : stations) {
    INFO(station->bus.name());
    const std::size_t n = station->bus.totals().ports.size();
    REQUIRE(station->log.size() == 840);  // all of the time
    for (std::size_t i = n; i < station->log.size(); ++i) {
      REQUIRE(station->log[i].port == station->log[i - n].port);
      REQUIRE(station->log[i].response == n * S);
    }
    for (std::size_t port = 0; port < n; ++port)
      CHECK(station->longest_wait(static_cast<int>(port)) == (n - 1) * S);
    station->check_laws();
  }
}

TEST_CASE("weights 1, 2 and 5 share a saturated bus so", "[outside]") {
  ArbiterConfig arbiter = arbiter_of(Arbitration::weighted_round_robin);
  arbiter.weights = {1, 2, 5};
  Station station("station", 3, server_config(arbiter), S - bus_cycles);
  for (int port = 0; port < 3; ++port)
    station
        .jobs(
            port, [] { return Picoseconds{0}; }, for_ever)
        .closed(2);
  sc_core::sc_start(from_ps(816 * S + 1));
  REQUIRE(station.log.size() == 816);
  std::vector<int> count(3);
  for (std::size_t i = 16; i < 816; ++i) ++count[static_cast<std::size_t>(station.log[i].port)];
  CHECK(count == std::vector<int>{100, 200, 500});
  station.check_laws();
}

// ---- Closed queues

// The asymptotic bound R >= max(S, N S - Z) (Kleinrock 1, section 3.8; P. J. Denning, J. P. Buzen, "The
// Operational Analysis of Queueing Network Models", Computing Surveys 10, 1978) is met with equality when
// nothing is random.
TEST_CASE("N customers who think for 4S get their answer in max(S, NS - 4S) exactly", "[outside]") {
  std::vector<std::unique_ptr<Station>> stations;
  for (const Arbitration kind : {Arbitration::first_come, Arbitration::round_robin})
    for (int n = 1; n <= 8; ++n)
      for (const bool blocking : {false, true}) {
        stations.push_back(std::make_unique<Station>(
            "closed" + number(kind) + "_" + std::to_string(n) + (blocking ? "b" : "n"), n, kind));
        for (int port = 0; port < n; ++port)
          stations.back()->customer(
              blocking, port, [] { return 4 * S; }, for_ever);
      }
  constexpr Picoseconds span = 10000 * S;
  sc_core::sc_start(from_ps(span + 1));
  for (const auto& station : stations) {
    INFO(station->bus.name());
    const std::size_t n = station->bus.totals().ports.size();
    const Picoseconds response = n <= 5 ? S : (n - 4) * S;
    for (std::size_t i = n; i < station->log.size(); ++i) REQUIRE(station->log[i].response == response);
    // X = min(N / (Z + S), 1 / S), but for the first think time and what is under way at the end.
    CHECK(std::abs(static_cast<double>(station->log.size()) -
                   std::min(static_cast<double>(n) / 5, 1.0) * 10000) <= static_cast<double>(n));
    station->check_laws();
  }
}

namespace {

// The machine-repairman queue M/M/1//N (Kleinrock 1, section 3.8): p0 = 1 / sum_k N!/(N-k)! (S/Z)^k, X = (1 -
// p0) / S, R = N / X - Z. Both times exponential; `think` and `service` are the means, R and 1/X in the same
// unit.
struct Repairman {
  int customers;
  double think, service;
  double p0, response, throughput;
};

void check(const Repairman& example, double narrow) {
  constexpr double unit = static_cast<double>(S);
  Station station("station", example.customers, server_config(arbiter_of(Arbitration::first_come)),
                  Exponential(example.service * unit - static_cast<double>(bus_cycles), 100));
  for (int port = 0; port < example.customers; ++port)
    station.customer(port % 2 == 0, port, Exponential(example.think * unit, static_cast<std::uint64_t>(port)),
                     for_ever);
  sc_core::sc_start(from_ps(static_cast<Picoseconds>(600000 / example.throughput * unit)));
  check(batch_means(responses(station.log)), example.response, narrow);

  std::vector<double> intervals;  // between completions: 1/X is their mean
  for (std::size_t i = 1; i < station.log.size(); ++i) {
    const Served &a = station.log[i - 1], &b = station.log[i];
    intervals.push_back(in_S(static_cast<double>(b.asked + b.response - a.asked - a.response)));
  }
  check(batch_means(intervals), 1 / example.throughput, narrow);
  const double busy = static_cast<double>(station.bus.totals().address_busy) / static_cast<double>(now_ps());
  CHECK(busy == Approx(1 - example.p0).epsilon(narrow));
  station.check_laws();
}

}  // namespace

TEST_CASE("machine repairman, 8 customers, think 20, service 2: response 4.18082", "[outside]") {
  check(Repairman{8, 20, 2, 0.33832, 4.18082, 0.33084}, 0.02);
}
TEST_CASE("machine repairman, 2 customers, think 12, service 8: response 11.2", "[outside]") {
  check(Repairman{2, 12, 8, 0.31034, 11.2, 0.086207}, 0.02);
}
TEST_CASE("machine repairman, 4 customers, think 4, service 1: response 1.80282", "[outside]") {
  check(Repairman{4, 4, 1, 0.31068, 1.80282, 0.68932}, 0.02);
}
TEST_CASE("machine repairman, 8 customers, think 4, service 1: response 4.25100", "[outside]") {
  check(Repairman{8, 4, 1, 0.03042, 4.25100, 0.96958}, 0.02);
}
TEST_CASE("machine repairman, 16 customers, think 4, service 1: response 12.00006", "[outside]") {
  check(Repairman{16, 4, 1, 3.76e-6, 12.00006, 0.999996}, 0.02);
}
