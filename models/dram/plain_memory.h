// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A PlainMemory is a memory without structure: every access takes a fixed time, one at a time. It is an
// ordinary TLM-2.0 target, useful without our bus. It holds the whole 64-bit space; what was never written
// reads as 0.
//
// b_transport adds waiting for earlier accesses plus latency plus one beat time for every beat to the delay and
// never waits; safe under temporal decoupling (earliest-gap booking). A MemoryTimes extension on the payload, if
// there is one, is told the waiting. nb_transport_fw completes early. DMI is granted page by page.
#pragma once

#include <systemc>
#include <tlm>

#include "earshot/dram/sparse_bytes.h"
#include "earshot/timing/calendar.h"
#include "earshot/timing/latency.h"
#include "earshot/version.h"

namespace earshot {

struct PlainMemoryConfig {
  sc_core::sc_time read_latency{40, sc_core::SC_NS};
  sc_core::sc_time write_latency{40, sc_core::SC_NS};
  sc_core::sc_time beat_time{5, sc_core::SC_NS};  // for each beat of beat_bytes, the last one partly filled
  unsigned beat_bytes = 8;                        // a power of two from 1 to 256
};

class PlainMemory : public sc_core::sc_module, private tlm::tlm_fw_transport_if<> {
 public:
  tlm::tlm_target_socket<> target_socket{"target_socket"};

  PlainMemory(sc_core::sc_module_name name, const PlainMemoryConfig& config,
              HeadersVersion headers = EARSHOT_HEADERS_VERSION);
  const char* kind() const override { return "earshot::PlainMemory"; }

  // Serving accesses: the sum over all of them. Utilisation is this over elapsed time.
  Picoseconds busy_time() const { return calendar_.busy_time(); }
  Picoseconds busy_until() const { return calendar_.last_end(); }

  // Copies bytes out, without time or side effect. REQUIRES: address + length does not pass the end of the space.
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const { bytes_.read(address, to, length); }

 private:
  void b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) override;
  tlm::tlm_sync_enum nb_transport_fw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                     sc_core::sc_time& time) override;
  bool get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) override;
  unsigned transport_dbg(tlm::tlm_generic_payload& payload) override;

  PlainMemoryConfig config_;
  SparseBytes bytes_;
  Calendar calendar_;
};

}  // namespace earshot
