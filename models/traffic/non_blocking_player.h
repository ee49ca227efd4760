// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A NonBlockingPlayer is one initiator that keeps several accesses in flight with nb_transport (base protocol, IEEE
// 1666-2011, 15.2), as a processor with non-blocking loads or a DMA engine does. It issues a stream's accesses in the
// stream's order: when there is room in flight, the think time passes, then the request phase begins; the next one
// begins when that has ended. It accepts every response at once. Payloads come from a pool of its own and are
// reference counted. A `replace` is carried out in its turn, whatever is still in flight.
#pragma once

#include <cstdint>
#include <memory>
#include <systemc>
#include <tlm>
#include <tlm_utils/simple_initiator_socket.h>
#include <vector>

#include "earshot/timing/agenda.h"
#include "earshot/traffic/playing.h"
#include "earshot/traffic/think_time.h"
#include "earshot/version.h"

namespace earshot {

class NonBlockingPlayer : public sc_core::sc_module, private tlm::tlm_mm_interface {
 public:
  tlm_utils::simple_initiator_socket<NonBlockingPlayer> initiator_socket{"initiator_socket"};

  // `outstanding`: accesses in flight at most, at least 1. Plays nothing until given a source before simulation starts.
  NonBlockingPlayer(sc_core::sc_module_name name, std::uint32_t initiator, unsigned outstanding,
                    ThinkTime think, PlayerHooks hooks,
                    HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  const char* kind() const override { return "earshot::NonBlockingPlayer"; }

  void set_source(std::unique_ptr<AccessSource> source) { source_ = std::move(source); }

  const PlayerEnd& end() const { return end_; }
  // The accesses in flight, one a line, oldest first; empty if there are none.
  std::string waiting() const;

 private:
  struct Flight : tlm::tlm_generic_payload {
    explicit Flight(tlm::tlm_mm_interface* owner) : tlm_generic_payload(owner), bytes(largest_access) {}
    Access access;
    std::uint64_t number = 0;
    std::vector<std::uint8_t> bytes;
  };

  void play();
  void issue(const Access& access);
  Flight& new_flight();
  tlm::tlm_sync_enum backward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time);
  void request_ended(Flight* flight);
  void answered(Flight* flight);
  void answered_inline(Flight* flight);
  void stop(std::exception_ptr error);
  void free(tlm::tlm_generic_payload* payload) override;

  const std::uint32_t initiator_;
  const unsigned outstanding_;
  ThinkTime think_;
  PlayerHooks hooks_;
  std::unique_ptr<AccessSource> source_;
  PlayerEnd end_;

  std::vector<std::unique_ptr<Flight>> flights_;
  std::vector<Flight*> unused_;
  std::vector<Flight*> in_flight_;  // in the order of issue
  Flight* requesting_ = nullptr;    // its request phase has not ended
  std::uint64_t issued_ = 0;
  Agenda agenda_;                   // phases that take effect later
  sc_core::sc_event changed_{"changed"};
};

}  // namespace earshot
