// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Remarks about an initiator or a target that does what TLM-2.0 does not allow but what works all the same: each once a
// module, as SC_REPORT_INFO "/earshot/oddity" at verbosity SC_MEDIUM, which is SystemC's default. To silence them:
// sc_report_handler::set_verbosity_level(SC_LOW), or set_actions("/earshot/oddity", SC_DO_NOTHING).
#pragma once

#include <cstdint>
#include <string>
#include <systemc>

namespace earshot {

enum class Oddity : std::uint8_t { streaming_width_0, status_preset, no_status };

class Oddities {
 public:
  // `who`: the module, and whom it is bound to.
  void remark(Oddity oddity, const std::string& who, const char* what) {
    const unsigned bit = 1u << static_cast<unsigned>(oddity);
    if ((seen_ & bit) != 0) return;
    seen_ |= bit;
    SC_REPORT_INFO_VERB("/earshot/oddity", (who + " " + what).c_str(), sc_core::SC_MEDIUM);
  }

 private:
  unsigned seen_ = 0;
};

}  // namespace earshot
