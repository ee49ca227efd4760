// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A WindowMemory is what stands behind one window of the address map: a DramController if the window is cached and
// the settings say so, else a PlainMemory. Whoever reads results need not care which.
#pragma once

#include <memory>

#include "earshot/bus/address_map.h"
#include "earshot/dram/dram_controller.h"
#include "earshot/dram/plain_memory.h"
#include "settings.h"

namespace earshot {

class WindowMemory {
 public:
  WindowMemory(const Window& window, const Settings& settings);

  tlm::tlm_target_socket<>& target_socket() { return dram_ ? dram_->target_socket : plain_->target_socket; }
  const Window& window() const { return window_; }

  // Plain: serving accesses. DRAM: the busiest channel's data bus.
  Picoseconds busy_time() const { return dram_ ? dram_->busy_time() : plain_->busy_time(); }
  Picoseconds busy_until() const { return dram_ ? dram_->busy_until() : plain_->busy_until(); }
  // Copies bytes out, without time or side effect. `address` is the bus's.
  void peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const;

  DramController* dram() const { return dram_.get(); }  // null: a plain memory

 private:
  const Window window_;
  std::unique_ptr<PlainMemory> plain_;
  std::unique_ptr<DramController> dram_;
};

}  // namespace earshot
