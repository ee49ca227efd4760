// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The arbitrated bus as a server, against queueing theory. The theorems are from L. Kleinrock, "Queueing
// Systems", volumes 1 (1975) and 2 (1976), and J. D. C. Little, Operations Research 9(3), 1961; sections
// beside each are from memory, the numbers are worked out from the formulas.
//
// A connected bus is held from grant to last beat: for an uncached read of one beat that is an address cycle,
// the target's time and a data cycle. The bus clock is 1 ps here and the target takes S less two of them, so
// that a transaction holds the bus for exactly S and no clock edge is waited for: times are rounded to S /
// 10^6 and that is all there is between the bus and the theory. The caches take no time to look up and pass
// the reads on.
#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <deque>
#include <random>
#include <sstream>

#include "earshot/timing/agenda.h"
#include "simulated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

constexpr Picoseconds S = 1000000;
constexpr std::uint64_t seed = 1;

constexpr double in_S(double picoseconds) {
  return picoseconds / static_cast<double>(S);
}

// Exponentially distributed times. Only the generator's raw output is used, which the standard fixes.
class Exponential {
 public:
  Exponential(double mean, std::uint64_t stream) : mean_(mean), random_(seed * 1000 + stream) {}
  Picoseconds operator()() {
    const double u = static_cast<double>(random_() >> 11) * 0x1p-53;  // in [0, 1)
    return static_cast<Picoseconds>(std::llround(-mean_ * std::log1p(-u)));
  }

 private:
  double mean_;
  std::mt19937_64 random_;
};

struct Served {
  int port;
  Picoseconds asked, response;
};
using Log = std::vector<Served>;
using Pause = std::function<Picoseconds()>;

// The jobs of one port, by nb_transport. open: each comes a pause after the one before. closed: `customers`
// of them, of which each comes a pause after its last answer.
class Jobs : public sc_core::sc_module, private tlm::tlm_mm_interface {
 public:
  tlm_utils::simple_initiator_socket<Jobs> socket{"socket"};

  Jobs(sc_core::sc_module_name name, int port, Log& log, Pause pause, std::uint64_t most)
      : sc_module(name), port_(port), log_(log), pause_(std::move(pause)), most_(most) {
    socket.register_nb_transport_bw(this, &Jobs::backward);
    SC_HAS_PROCESS(Jobs);
    SC_METHOD(work);
    sensitive << agenda_.due();
    dont_initialize();
  }
  void open() { next_arrival(); }
  void closed(int customers) {
    closed_ = true;
    for (int i = 0; i < customers; ++i) next_arrival();
  }

 private:
  struct Job : tlm::tlm_generic_payload {
    std::uint8_t bytes[8];
    Picoseconds asked = 0;
  };

  void work() { agenda_.run(); }
  void next_arrival() {
    if (arrivals_ == most_) return;
    ++arrivals_;
    agenda_.at<&Jobs::arrive>(now_ps() + pause_(), this, static_cast<Job*>(nullptr));
  }
  void arrive(Job*) {
    if (!closed_) next_arrival();
    if (unused_.empty()) {
      jobs_.push_back(std::make_unique<Job>());
      unused_.push_back(jobs_.back().get());
      unused_.back()->set_mm(this);
    }
    Job& job = *unused_.back();
    unused_.pop_back();
    job.acquire();
    job.set_read();
    job.set_data_ptr(job.bytes);
    job.set_data_length(sizeof job.bytes);
    job.set_streaming_width(sizeof job.bytes);
    job.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
    job.asked = now_ps();
    queue_.push_back(&job);
    send_next();
  }
  void send_next() {
    if (requesting_ != nullptr || queue_.empty()) return;
    requesting_ = queue_.front();
    queue_.pop_front();
    tlm::tlm_phase phase = tlm::BEGIN_REQ;
    sc_core::sc_time time;
    if (socket->nb_transport_fw(*requesting_, phase, time) != tlm::TLM_ACCEPTED)
      throw std::logic_error("an access completed early");
  }
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time&) {
    Job& job = static_cast<Job&>(payload);
    if (requesting_ == &job) requesting_ = nullptr;
    if (phase == tlm::BEGIN_RESP) {
      if (!job.is_response_ok()) throw std::logic_error("an access failed");
      log_.push_back({port_, job.asked, now_ps() - job.asked});
      job.release();
      if (closed_) next_arrival();
    }
    send_next();
    return phase == tlm::BEGIN_RESP ? tlm::TLM_COMPLETED : tlm::TLM_ACCEPTED;
  }
  void free(tlm::tlm_generic_payload* payload) override { unused_.push_back(static_cast<Job*>(payload)); }

  int port_;
  Log& log_;
  Pause pause_;
  std::uint64_t most_;
  bool closed_ = false;
  std::uint64_t arrivals_ = 0;
  Agenda agenda_;
  Job* requesting_ = nullptr;
  std::deque<Job*> queue_;  // arrived, not yet sent: the base protocol has one request phase at a time
  std::vector<std::unique_ptr<Job>> jobs_;
  std::vector<Job*> unused_;
};

// One customer by b_transport, who comes a pause after the last answer.
class BlockingCustomer : public sc_core::sc_module {
 public:
  Driver driver{"driver"};

  BlockingCustomer(sc_core::sc_module_name name, int port, Log& log, Pause pause, std::uint64_t most)
      : sc_module(name), port_(port), log_(log), pause_(std::move(pause)), most_(most) {
    SC_HAS_PROCESS(BlockingCustomer);
    SC_THREAD(run);
  }

 private:
  void run() {
    std::uint8_t bytes[8];
    for (std::uint64_t i = 0; i < most_; ++i) {
      sc_core::wait(from_ps(pause_()));
      const Picoseconds asked = now_ps();
      if (driver.transport(tlm::TLM_READ_COMMAND, 0, bytes, sizeof bytes) != tlm::TLM_OK_RESPONSE)
        throw std::logic_error("an access failed");
      log_.push_back({port_, asked, now_ps() - asked});
    }
  }

  int port_;
  Log& log_;
  Pause pause_;
  std::uint64_t most_;
};

// A target whose accesses take as long as `service` says.
class Drawn : public sc_core::sc_module {
 public:
  tlm_utils::simple_target_socket<Drawn> target_socket{"target_socket"};
  Drawn(sc_core::sc_module_name name, Pause service) : sc_module(name), service_(std::move(service)) {
    target_socket.register_nb_transport_fw(this, &Drawn::forward);
  }
  Picoseconds busy_time() const { return busy_; }

 private:
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase&, sc_core::sc_time& time) {
    const Picoseconds service = service_();
    busy_ += service;
    time += from_ps(service);
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
    return tlm::TLM_COMPLETED;
  }
  Pause service_;
  Picoseconds busy_ = 0;
};

// A bus, its ports' caches, and one target.
constexpr Picoseconds bus_cycles = 2;  // of S

SnoopingBusConfig server_config(const ArbiterConfig& arbiter) {
  SnoopingBusConfig config;
  config.windows = {{"device", 0, 0, false, 0}};
  config.timing = BusTiming::arbitrated;
  config.structure = BusStructure::connected;
  config.clock = from_ps(1);
  config.arbitration_cycles = 0;
  config.arbiter = arbiter;
  config.stall_cycles = 0;
  return config;
}
PlainMemoryConfig fixed_latency(Picoseconds latency) {
  PlainMemoryConfig config;
  config.read_latency = from_ps(latency);
  config.beat_time = sc_core::SC_ZERO_TIME;
  return config;
}
ArbiterConfig arbiter_of(Arbitration kind) {
  ArbiterConfig config;
  config.kind = kind;
  return config;
}

class Station {
 public:
  Station(const std::string& name, int ports, const SnoopingBusConfig& config, Picoseconds target_latency)
      : Station(name, ports, config) {
    memory_ = std::make_unique<PlainMemory>((name + "_memory").c_str(), fixed_latency(target_latency));
    bus.window_socket("device").bind(memory_->target_socket);
  }
  Station(const std::string& name, int ports, const SnoopingBusConfig& config, Pause service)
      : Station(name, ports, config) {
    drawn = std::make_unique<Drawn>((name + "_target").c_str(), std::move(service));
    bus.window_socket("device").bind(drawn->target_socket);
  }
  // Serves in S.
  Station(const std::string& name, int ports, Arbitration arbitration)
      : Station(name, ports, server_config(arbiter_of(arbitration)), S - bus_cycles) {}

  // A job every pause. One stream of random numbers a port, the same in every station.
  Jobs& jobs(int port, Pause pause, std::uint64_t most) {
    jobs_.push_back(std::make_unique<Jobs>((name_ + "_jobs" + std::to_string(port)).c_str(), port, log,
                                           std::move(pause), most));
    jobs_.back()->socket.bind(caches_[static_cast<std::size_t>(port)]->cpu_socket);
    return *jobs_.back();
  }
  void blocking_customer(int port, Pause pause, std::uint64_t most) {
    customers_.push_back(std::make_unique<BlockingCustomer>(
        (name_ + "_customer" + std::to_string(port)).c_str(), port, log, std::move(pause), most));
    customers_.back()->driver.socket.bind(caches_[static_cast<std::size_t>(port)]->cpu_socket);
  }
  // Jobs come one by one, `rate` of them in S from each port, altogether about `most`.
  void poisson(double rate, std::uint64_t most) {
    const std::size_t ports = caches_.size();
    for (std::size_t port = 0; port < ports; ++port)
      jobs(static_cast<int>(port), Exponential(static_cast<double>(S) / rate, port), most / ports).open();
    log.reserve(most);
  }
  void customer(bool blocking, int port, const Pause& pause, std::uint64_t most) {
    if (blocking)
      blocking_customer(port, pause, most);
    else
      jobs(port, pause, most).closed(1);
  }

  double total_response() const {
    double sum = 0;
    for (const Served& job : log) sum += static_cast<double>(job.response);
    return sum;
  }
  Picoseconds longest_wait(int port) const {
    return bus.totals().ports[static_cast<std::size_t>(port)].longest_wait;
  }
  // The bus's checks of itself, and Little's law between what its queues saw and what their customers did.
  void check_laws() const {
    CHECK(bus.broken_laws() == std::vector<std::string>{});
    for (const auto& cache : caches_) CHECK(cache->broken_laws() == std::vector<std::string>{});
    if (bus.waiting() != "")
      return;  // stopped on the way: some of what the queues saw has not come to its end
    double present = 0;
    for (const BusQueue& queue : bus.queues())
      if (queue.name == "requests" || queue.name == "outstanding transactions")
        present += queue.meter->mean_present(now_ps()) * static_cast<double>(now_ps());
    CHECK(present == Approx(total_response()).epsilon(1e-12));
  }

  SnoopingBus bus;
  std::unique_ptr<Drawn> drawn;
  Log log;  // in the order of completion

 private:
  Station(const std::string& name, int ports, const SnoopingBusConfig& config)
      : bus((name + "_bus").c_str(), config), name_(name) {
    CacheConfig cache;
    cache.table = std::make_shared<const Table>(load_table("msi"));
    cache.hit_time = sc_core::SC_ZERO_TIME;
    for (int port = 0; port < ports; ++port) {
      caches_.push_back(
          std::make_unique<InvalidatingCache>((name + "_cache" + std::to_string(port)).c_str(), cache));
      caches_.back()->bus_socket.bind(bus.cache_socket);
    }
  }

  std::string name_;
  std::unique_ptr<PlainMemory> memory_;
  std::vector<std::unique_ptr<InvalidatingCache>> caches_;
  std::vector<std::unique_ptr<Jobs>> jobs_;
  std::vector<std::unique_ptr<BlockingCustomer>> customers_;
};

// ---- Confidence

// The mean of values that depend on their neighbours, by batch means: 41 batches, each much longer than the
// memory of the queue, the first dropped for its empty beginning. `half`: half of the 99.9 % confidence
// interval, by Student's distribution with 39 degrees of freedom.
struct Estimate {
  double mean, half;
};
Estimate batch_means(const std::vector<double>& values) {
  constexpr std::size_t batches = 40;
  constexpr double quantile = 3.5581;
  const std::size_t length = values.size() / (batches + 1);
  double sum = 0, squares = 0;
  for (std::size_t batch = 1; batch <= batches; ++batch) {
    double mean = 0;
    for (std::size_t i = 0; i < length; ++i) mean += values[batch * length + i];
    mean /= static_cast<double>(length);
    sum += mean;
    squares += mean * mean;
  }
  const double mean = sum / batches;
  return {mean, quantile * std::sqrt((squares / batches - mean * mean) / (batches - 1))};
}
// The estimate agrees with the expected value, and is so narrow that this says something.
void check(const Estimate& estimate, double expected, double narrow) {
  INFO("seed " << seed << ": " << estimate.mean << " +- " << estimate.half << " (99.9 %), expected "
               << expected);
  CHECK(std::abs(estimate.mean - expected) <= estimate.half);
  CHECK(estimate.half <= narrow * expected);
}

std::vector<double> waits(const Log& log, int port = -1) {  // of all ports, in S
  std::vector<double> all;
  for (const Served& job : log)
    if (port < 0 || job.port == port) all.push_back(in_S(static_cast<double>(job.response)) - 1);
  return all;
}
std::vector<double> responses(const Log& log) {
  std::vector<double> all;
  for (const Served& job : log) all.push_back(in_S(static_cast<double>(job.response)));
  return all;
}

const std::vector<Arbitration> service_blind = {Arbitration::first_come, Arbitration::round_robin,
                                                Arbitration::fixed_priority,
                                                Arbitration::weighted_round_robin, Arbitration::lottery};
std::string number(Arbitration kind) {
  return std::to_string(static_cast<int>(kind));
}

constexpr std::uint64_t for_ever = ~std::uint64_t{0};

}  // namespace

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
  Station station("station", 4, Arbitration::first_come);
  station.poisson(0.8 / 4, 200000);
  sc_core::sc_start();
  std::stable_sort(station.log.begin(), station.log.end(),
                   [](const Served& a, const Served& b) { return a.asked < b.asked; });
  Picoseconds free = 0;
  for (const Served& job : station.log) {
    free = std::max(free, job.asked) + S;
    REQUIRE(job.asked + job.response == free);
  }
  station.check_laws();
}

TEST_CASE("on a split bus address bus, memory and data bus are three queues in a row, to the picosecond",
          "[outside]") {
  // Clock edges are waited for here: before the grant, and by the data.
  constexpr Picoseconds clock = 5000, address = 3 * clock, memory = 41234, data = 9 * clock;
  SnoopingBusConfig config = server_config(arbiter_of(Arbitration::first_come));
  config.structure = BusStructure::split;
  config.clock = from_ps(clock);
  config.width_bytes = 1;
  config.address_cycles = 3;
  config.arbitration_cycles = 2;
  config.turnaround_cycles = 1;
  config.outstanding = 1000;
  Station station("station", 4, config, memory);
  station.poisson(0.85 / 4 * static_cast<double>(S) / static_cast<double>(data), 100000);
  sc_core::sc_start();
  std::stable_sort(station.log.begin(), station.log.end(),
                   [](const Served& a, const Served& b) { return a.asked < b.asked; });
  Picoseconds address_free = 0, memory_free = 0, data_free = 0;
  for (const Served& job : station.log) {
    address_free = std::max(address_free, next_edge(job.asked, clock) + 2 * clock) + address;
    memory_free = std::max(memory_free, address_free) + memory;
    data_free = std::max(data_free, next_edge(memory_free, clock)) + data;
    REQUIRE(job.asked + job.response == data_free - clock);  // the turnaround is nobody's time
  }
  CHECK(station.bus.totals().data_busy == station.log.size() * data);
  station.check_laws();
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
