// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/sparse_bytes.h"

#include <algorithm>
#include <cstring>

namespace earshot {

SparseBytes::Page* SparseBytes::find(std::uint64_t number) const {
  Recent& recent = recent_[number % recent_.size()];
  if (recent.number == number) return recent.page;
  const auto found = pages_.find(number);
  if (found == pages_.end()) return nullptr;
  recent = {number, found->second.get()};
  return recent.page;
}

std::uint8_t* SparseBytes::page(std::uint64_t address) {
  const std::uint64_t number = address / page_bytes;
  Page* page = find(number);
  if (page == nullptr) {
    page = pages_.emplace(number, std::make_unique<Page>()).first->second.get();
    page->fill(0);
  }
  return page->data();
}

void SparseBytes::read(std::uint64_t address, std::uint8_t* to, std::size_t length) const {
  while (length > 0) {
    const std::size_t offset = address % page_bytes;
    const std::size_t piece = std::min<std::size_t>(length, page_bytes - offset);
    const Page* page = find(address / page_bytes);
    if (page == nullptr)
      std::memset(to, 0, piece);
    else
      std::memcpy(to, page->data() + offset, piece);
    address += piece;
    to += piece;
    length -= piece;
  }
}

void SparseBytes::write(std::uint64_t address, const std::uint8_t* from, std::size_t length) {
  while (length > 0) {
    const std::size_t offset = address % page_bytes;
    const std::size_t piece = std::min<std::size_t>(length, page_bytes - offset);
    std::memcpy(page(address) + offset, from, piece);
    address += piece;
    from += piece;
    length -= piece;
  }
}

}  // namespace earshot
