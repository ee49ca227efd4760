// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// LearnedBytes is what a recording so far says about memory: the last known value of every byte that an
// access touched. It finds the reads whose values no recorded write explains. Memory use is that of the pages
// touched, whatever the number of accesses. Pure C++.
#pragma once

#include <array>
#include <cstdint>
#include <memory>
#include <unordered_map>

namespace earshot {

class LearnedBytes {
 public:
  // From the least to the most that is to be said.
  enum class Finding {
    agrees,      // every byte was known, and has the value read
    first_seen,  // no byte known before has another value, and some byte was not known before
    differs,     // a byte known before has another value: something unrecorded wrote it
  };

  // The `size` (1 to 8) bytes at `address` now have the bytes of `value`.
  void write(std::uint64_t address, std::uint32_t size, std::uint64_t value);

  // The same, after a comparison with what was known.
  Finding read(std::uint64_t address, std::uint32_t size, std::uint64_t value);

  // Bytes whose first access was a read, so that their value from before the recording is known.
  std::uint64_t bytes_first_read() const { return bytes_first_read_; }

 private:
  static constexpr std::uint64_t page_size = 4096;
  // With room behind the end, so that 8 bytes can be taken from anywhere in the page.
  struct Page {
    std::array<std::uint8_t, page_size + 8> bytes{};
    std::array<std::uint8_t, page_size + 8> known{};  // all bits of a known byte are set
  };

  Page& page_of(std::uint64_t address);
  Finding read_within_page(std::uint64_t address, std::uint32_t size, std::uint64_t value);

  std::unordered_map<std::uint64_t, std::unique_ptr<Page>> pages_;
  std::uint64_t last_number_ = ~std::uint64_t{0};  // never a page's: numbers have 52 bits
  Page* last_page_ = nullptr;
  std::uint64_t bytes_first_read_ = 0;
};

}  // namespace earshot
