// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Text put together in place: the runtime may not allocate memory, which would change the program's.
#pragma once

#include <cstddef>
#include <cstdint>

namespace earshot::recorder {

class Message {
 public:
  Message& add(const char* text) {
    while (*text != 0 && size_ + 1 < sizeof text_) text_[size_++] = *text++;
    text_[size_] = 0;
    return *this;
  }
  Message& add_number(std::uint64_t number, unsigned base = 10) {
    char digits[24];
    std::size_t at = sizeof digits;
    digits[--at] = 0;
    do {
      digits[--at] = "0123456789abcdef"[number % base];
      number /= base;
    } while (number != 0);
    return add(digits + at);
  }
  Message& add_address(const void* address) {
    return add("0x").add_number(reinterpret_cast<std::uintptr_t>(address), 16);
  }
  const char* text() const { return text_; }
  std::size_t size() const { return size_; }

 private:
  char text_[4096] = {};
  std::size_t size_ = 0;
};

}  // namespace earshot::recorder
