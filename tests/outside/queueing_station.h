// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A server to hold against queueing theory: the real arbitrated bus with the real caches, customers before it
// and a target behind it whose time is known; and confidence intervals. Header only; any number of stations
// may live in one simulation.
//
// A connected bus is held from grant to last beat: for an uncached read of one beat that is an address cycle,
// the target's time and a data cycle. The bus clock is 1 ps here and the target takes S less two of them, so
// that a transaction holds the bus for exactly S and no clock edge is waited for: times are rounded to S /
// 10^6 and that is all there is between the bus and the theory. The caches take no time to look up and pass
// the reads on.
#pragma once

#include <algorithm>
#include <catch2/catch.hpp>
#include <cmath>
#include <deque>
#include <functional>
#include <memory>
#include <random>
#include <string>
#include <tuple>
#include <vector>

#include "earshot/timing/agenda.h"
#include "simulated.h"

namespace earshot::test::queueing {

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
  bool write = false;
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
  void write_every(std::uint64_t n) { write_every_ = n; }
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
    ++sent_;
    job.set_command(write_every_ > 0 && sent_ % write_every_ == 0 ? tlm::TLM_WRITE_COMMAND
                                                                  : tlm::TLM_READ_COMMAND);
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
      log_.push_back({port_, job.asked, now_ps() - job.asked, job.is_write()});
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
  std::uint64_t write_every_ = 0;  // 0: never
  std::uint64_t arrivals_ = 0, sent_ = 0;
  Agenda agenda_;
  Job* requesting_ = nullptr;
  std::deque<Job*> queue_;  // arrived, not yet sent: the base protocol has one request phase at a time
  std::vector<std::unique_ptr<Job>> jobs_;
  std::vector<Job*> unused_;
};

// One customer by b_transport, who comes a pause after the last answer.
class BlockingCustomer : public sc_core::sc_module {
 public:
  tlm_utils::simple_initiator_socket<BlockingCustomer> socket{"socket"};

  BlockingCustomer(sc_core::sc_module_name name, int port, Log& log, Pause pause, std::uint64_t most)
      : sc_module(name), port_(port), log_(log), pause_(std::move(pause)), most_(most) {
    job_.set_read();
    job_.set_data_ptr(bytes_);
    job_.set_data_length(sizeof bytes_);
    job_.set_streaming_width(sizeof bytes_);
    SC_HAS_PROCESS(BlockingCustomer);
    SC_THREAD(run);
  }

 private:
  void run() {
    for (std::uint64_t i = 0; i < most_; ++i) {
      sc_core::wait(from_ps(pause_()));
      const Picoseconds asked = now_ps();
      job_.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
      sc_core::sc_time delay;
      socket->b_transport(job_, delay);
      if (!job_.is_response_ok() || delay != sc_core::SC_ZERO_TIME)
        throw std::logic_error("an access failed");
      log_.push_back({port_, asked, now_ps() - asked});
    }
  }

  int port_;
  Log& log_;
  Pause pause_;
  std::uint64_t most_;
  std::uint8_t bytes_[8];
  tlm::tlm_generic_payload
      job_;  // not on the process's stack, which is never unwound if the simulation ends first
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

inline SnoopingBusConfig server_config(const ArbiterConfig& arbiter) {
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
inline PlainMemoryConfig fixed_latency(Picoseconds latency) {
  PlainMemoryConfig config;
  config.read_latency = from_ps(latency);
  config.write_latency = sc_core::SC_ZERO_TIME;
  config.beat_time = sc_core::SC_ZERO_TIME;
  return config;
}
inline ArbiterConfig arbiter_of(Arbitration kind) {
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
    customers_.back()->socket.bind(caches_[static_cast<std::size_t>(port)]->cpu_socket);
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

  Log in_order_of_asking() const {
    Log sorted = log;
    std::sort(sorted.begin(), sorted.end(), [](const Served& a, const Served& b) {
      return std::tie(a.asked, a.port) < std::tie(b.asked, b.port);
    });
    return sorted;
  }
  double total_response() const {
    double sum = 0;
    for (const Served& job : log) sum += static_cast<double>(job.response);
    return sum;
  }
  // The sum of all stays in a queue of the bus, whose jobs have all left it.
  double stayed(const std::string& queue) const {
    for (const BusQueue& one : bus.queues())
      if (one.name == queue) return one.meter->mean_stay() * static_cast<double>(one.meter->arrivals());
    throw std::logic_error("the bus has no queue " + queue);
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
    CHECK(stayed("requests") + stayed("outstanding transactions") == Approx(total_response()).epsilon(1e-12));
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
inline Estimate batch_means(const std::vector<double>& values) {
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
inline void check(const Estimate& estimate, double expected, double narrow) {
  INFO("seed " << seed << ": " << estimate.mean << " +- " << estimate.half << " (99.9 %), expected "
               << expected);
  CHECK(std::abs(estimate.mean - expected) <= estimate.half);
  CHECK(estimate.half <= narrow * expected);
}

inline std::vector<double> waits(const Log& log, int port = -1) {  // in S; of one port or all
  std::vector<double> all;
  for (const Served& job : log)
    if (port < 0 || job.port == port) all.push_back(in_S(static_cast<double>(job.response)) - 1);
  return all;
}
inline std::vector<double> responses(const Log& log) {
  std::vector<double> all;
  for (const Served& job : log) all.push_back(in_S(static_cast<double>(job.response)));
  return all;
}

inline const std::vector<Arbitration> service_blind = {
    Arbitration::first_come, Arbitration::round_robin, Arbitration::fixed_priority,
    Arbitration::weighted_round_robin, Arbitration::lottery};
inline std::string number(Arbitration kind) {
  return std::to_string(static_cast<int>(kind));
}

constexpr std::uint64_t for_ever = ~std::uint64_t{0};

}  // namespace earshot::test::queueing
