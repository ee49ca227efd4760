// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recorder/learned_bytes.h"

namespace earshot {

namespace {

// 8 bytes as a number, the first the lowest; compilers make one instruction of either.
std::uint64_t eight_at(const std::uint8_t* bytes) {
  std::uint64_t value = 0;
  for (unsigned i = 0; i < 8; ++i) value |= std::uint64_t{bytes[i]} << 8 * i;
  return value;
}
void put_eight(std::uint8_t* bytes, std::uint64_t value) {
  for (unsigned i = 0; i < 8; ++i) bytes[i] = static_cast<std::uint8_t>(value >> 8 * i);
}

// The bits of `size` bytes.
std::uint64_t bits_of(std::uint32_t size) {
  return ~std::uint64_t{0} >> (64 - 8 * size);
}

// How many of an access's bytes lie in the page where it begins.
std::uint32_t bytes_before_page_end(std::uint64_t address, std::uint32_t size, std::uint64_t page_size) {
  const std::uint64_t room = page_size - address % page_size;
  return room < size ? static_cast<std::uint32_t>(room) : size;
}

}  // namespace

LearnedBytes::Page& LearnedBytes::page_of(std::uint64_t address) {
  const std::uint64_t number = address / page_size;
  if (number != last_number_) {
    std::unique_ptr<Page>& page = pages_[number];
    if (page == nullptr) page = std::make_unique<Page>();
    last_number_ = number;
    last_page_ = page.get();
  }
  return *last_page_;
}

void LearnedBytes::write(std::uint64_t address, std::uint32_t size, std::uint64_t value) {
  const std::uint32_t here = bytes_before_page_end(address, size, page_size);
  Page& page = page_of(address);
  const std::uint64_t at = address % page_size;
  const std::uint64_t bits = bits_of(here);
  put_eight(&page.bytes[at], (eight_at(&page.bytes[at]) & ~bits) | (value & bits));
  put_eight(&page.known[at], eight_at(&page.known[at]) | bits);
  if (here < size) write(address + here, size - here, value >> 8 * here);
}

LearnedBytes::Finding LearnedBytes::read(std::uint64_t address, std::uint32_t size, std::uint64_t value) {
  const std::uint32_t here = bytes_before_page_end(address, size, page_size);
  const Finding finding = read_within_page(address, here, value);
  if (here == size) return finding;
  const Finding rest = read_within_page(address + here, size - here, value >> 8 * here);
  return finding > rest ? finding : rest;
}

LearnedBytes::Finding LearnedBytes::read_within_page(std::uint64_t address, std::uint32_t size,
                                                     std::uint64_t value) {
  Page& page = page_of(address);
  const std::uint64_t at = address % page_size;
  const std::uint64_t bits = bits_of(size);
  const std::uint64_t known = eight_at(&page.known[at]) & bits;
  const std::uint64_t difference = (eight_at(&page.bytes[at]) ^ value) & bits;
  if (known == bits && difference == 0) return Finding::agrees;
  for (std::uint32_t i = 0; i < size; ++i) bytes_first_read_ += page.known[at + i] == 0 ? 1u : 0u;
  write(address, size, value);
  return (difference & known) != 0 ? Finding::differs : Finding::first_seen;
}

}  // namespace earshot
