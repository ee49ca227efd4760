// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What stands in place of the interconnect of a TLM-2.0 example platform: the platform's own source,
// unchanged, binds its initiators to target_socket[i] and initiator_socket[j] to its targets. By the run's
// choice there is nothing in between but the platform's own interconnect; or caches and a SnoopingBus instead
// of it, its windows cached or uncached; or these before it. An observer of the base protocol sits on every
// hop, a coherence monitor on the caches.
#pragma once

#include <memory>
#include <string>
#include <systemc>
#include <tlm>
#include <vector>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/coherent_cache.h"
#include "earshot/observe/coherence_monitor.h"
#include "tlm/base_protocol_observer.h"

namespace earshot::test {

// One run of one platform: what was chosen, and everything there is to tell afterwards.
struct ClientRun {
  enum class Place { original, instead, before, uncached } place = Place::original;
  std::string protocol;
  BusTiming timing = BusTiming::annotated;

  std::unique_ptr<SnoopingBus> snooping_bus;
  std::vector<std::unique_ptr<CoherentCache>> caches;
  std::unique_ptr<CoherenceMonitor> monitor;
  std::vector<std::unique_ptr<BaseProtocolObserver<>>> hops;
  std::vector<std::vector<std::string>> reads;  // of each initiator, in the order of the requests
  std::vector<std::string> verdicts;            // the platform's reports of completion, warnings and errors

  // A hop with an observer on it.
  BaseProtocolObserver<>& watch(const std::string& name);
  void watch_initiator(BaseProtocolObserver<>& hop, std::size_t number);
  void watch_memory(BaseProtocolObserver<>& hop, std::uint64_t base);
  // Caches and bus between these; target i holds the addresses from i << shift on.
  void insert(const std::vector<tlm::tlm_initiator_socket<>*>& initiators,
              const std::vector<tlm::tlm_target_socket<>*>& targets, unsigned shift);
  void print() const;
};
ClientRun& client_run();  // the only one of this process

constexpr unsigned their_shift = 28;  // the examples' interconnects decode the address's bits from 28 on

template <template <int, int> class TheirBus, int initiators, int targets>
class Insertion : public sc_core::sc_module {
 public:
  struct Upstream {
    std::vector<BaseProtocolObserver<>*> hops;
    tlm::tlm_target_socket<>& operator[](int i) { return hops[static_cast<std::size_t>(i)]->target_socket; }
  } target_socket;
  struct Downstream {
    std::vector<BaseProtocolObserver<>*> hops;
    tlm::tlm_initiator_socket<>& operator[](int i) {
      return hops[static_cast<std::size_t>(i)]->initiator_socket;
    }
  } initiator_socket;

  explicit Insertion(sc_core::sc_module_name name) : sc_module(name) {
    ClientRun& run = client_run();
    std::vector<tlm::tlm_initiator_socket<>*> from;
    std::vector<tlm::tlm_target_socket<>*> to;
    for (int i = 0; i < initiators; ++i) {
      target_socket.hops.push_back(&run.watch("initiator" + std::to_string(i)));
      run.watch_initiator(*target_socket.hops.back(), static_cast<std::size_t>(i));
      from.push_back(&target_socket.hops.back()->initiator_socket);
    }
    for (int i = 0; i < targets; ++i) {
      initiator_socket.hops.push_back(&run.watch("target" + std::to_string(i)));
      run.watch_memory(*initiator_socket.hops.back(), static_cast<std::uint64_t>(i) << their_shift);
      to.push_back(&initiator_socket.hops.back()->target_socket);
    }
    if (run.place == ClientRun::Place::original) {
      original_ = std::make_unique<TheirBus<initiators, targets>>("theirs");
      for (int i = 0; i < initiators; ++i)
        from[static_cast<std::size_t>(i)]->bind(original_->target_socket[i]);
      for (int i = 0; i < targets; ++i) original_->initiator_socket[i].bind(*to[static_cast<std::size_t>(i)]);
    } else if (run.place == ClientRun::Place::before) {
      behind_ = std::make_unique<TheirBus<1, targets>>("theirs");
      BaseProtocolObserver<>& hop = run.watch("their-bus");
      hop.initiator_socket.bind(behind_->target_socket[0]);
      for (int i = 0; i < targets; ++i) behind_->initiator_socket[i].bind(*to[static_cast<std::size_t>(i)]);
      run.insert(from, {&hop.target_socket}, 32);
    } else {
      run.insert(from, to, their_shift);
    }
  }

 private:
  std::unique_ptr<TheirBus<initiators, targets>> original_;
  std::unique_ptr<TheirBus<1, targets>> behind_;
};

}  // namespace earshot::test
