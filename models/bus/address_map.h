// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An AddressMap says which window of the bus's address space an address falls into, and whether caches may
// keep copies of it. Kernel-free; immutable once built.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

namespace earshot {

// Addresses [base, base + size). A size of 0 means all of the 64-bit space from `base` on.
struct Window {
  std::string name;              // unique; names the bus's socket for it
  std::uint64_t base = 0;
  std::uint64_t size = 0;        // bytes
  bool cached = true;            // false: every access passes through to the target
  std::uint64_t target_base = 0; // the address the target sees for `base`
  // Bytes the target takes in one access, a power of two from 1 to 256; 0: any number. What is longer (a fill, a
  // write-back, a write-through, an uncached access) is sent to it in several accesses, one after another in address
  // order; the first that it refuses is the answer to all, and nothing of it is cached. (A target that refuses whatever ends
  // at its last byte refuses its last line so or so: end the cached window before that line.)
  unsigned max_burst = 0;
  // The target never sets a response status (leaves TLM_INCOMPLETE_RESPONSE), and means that all went well. Without
  // this such an answer is an error to whoever asked.
  bool no_status_is_ok = false;

  std::uint64_t last() const { return size == 0 ? ~std::uint64_t{0} : base + (size - 1); }
  bool holds(std::uint64_t address) const { return address >= base && address <= last(); }
};

class AddressMap {
 public:
  explicit AddressMap(std::vector<Window> windows) : windows_(std::move(windows)) {}

  // Every problem of the map, one a line; empty if it is sound: overlapping windows, a window that runs past the
  // end of the address space, names that are empty or used twice, an impossible max_burst. `line_bytes` > 0 also checks that cached
  // windows begin and end on a line.
  std::vector<std::string> problems(unsigned line_bytes = 0) const;

  // The index of the window that holds all of [address, address + length), or -1. REQUIRES: length > 0.
  int find(std::uint64_t address, std::uint64_t length) const {
    for (std::size_t i = 0; i < windows_.size(); ++i) {
      const Window& window = windows_[i];
      if (window.holds(address)) return length - 1 <= window.last() - address ? static_cast<int>(i) : -1;
    }
    return -1;
  }

  const std::vector<Window>& windows() const { return windows_; }
  const Window& window(int index) const { return windows_[static_cast<std::size_t>(index)]; }

 private:
  std::vector<Window> windows_;
};

}  // namespace earshot
