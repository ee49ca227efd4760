// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// PackedAddresses move a recording's accesses together: the pages of 4 KiB that it touches get places one after
// another, in the order of their addresses, from the beginning of the first cached window on. A recorded program's
// addresses are virtual and far apart (code and heap, stacks); a DRAM has room for what is touched, as an operating
// system's page tables see to. Addresses in uncached windows stay. What is adjacent stays adjacent, and the place of
// a byte depends on nothing but the recording. Kernel-free.
#pragma once

#include <cstdint>
#include <memory>
#include <string>
#include <vector>

#include "earshot/bus/address_map.h"
#include "earshot/traffic/recording.h"

namespace earshot {

class PackedAddresses {
 public:
  // Reads the whole recording once. Throws RecordingError, also if a window is too small.
  PackedAddresses(const std::string& recording, const std::vector<Window>& windows);

  std::uint64_t place(std::uint64_t address) const;
  // `source`, with every address moved. This must outlive it.
  std::unique_ptr<AccessSource> moved(std::unique_ptr<AccessSource> source) const;

 private:
  static constexpr std::uint64_t page_bytes = 4096;
  bool stays(std::uint64_t address) const;

  std::vector<Window> windows_;
  std::uint64_t base_ = 0;
  std::vector<std::uint64_t> pages_;  // numbers of the pages touched, ascending
};

}  // namespace earshot
