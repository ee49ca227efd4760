// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// SparseBytes is a 64-bit space of bytes, all 0 until written, stored in pages that come into being on their
// first write. Kernel-free.
#pragma once

#include <array>
#include <cstdint>
#include <memory>
#include <unordered_map>

namespace earshot {

class SparseBytes {
 public:
  static constexpr std::uint64_t page_bytes = 4096;

  // REQUIRES: address + length does not pass the end of the space.
  void read(std::uint64_t address, std::uint8_t* to, std::size_t length) const;
  void write(std::uint64_t address, const std::uint8_t* from, std::size_t length);

  // The page that holds `address`, created if need be; stays valid for the life of this object.
  std::uint8_t* page(std::uint64_t address);

 private:
  using Page = std::array<std::uint8_t, page_bytes>;
  Page* find(std::uint64_t number) const;

  std::unordered_map<std::uint64_t, std::unique_ptr<Page>> pages_;
  // Pages found lately, one for each value of the number's low bits: most lookups end here.
  struct Recent {
    std::uint64_t number = ~std::uint64_t{0};
    Page* page = nullptr;
  };
  mutable std::array<Recent, 256> recent_;
};

}  // namespace earshot
