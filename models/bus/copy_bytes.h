// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Copying the bytes of an access.
#pragma once

#include <cstddef>
#include <cstdint>
#include <cstring>
#include <tlm>

namespace earshot {

// Copies a short run of bytes. The sizes processors use are spelt out: a call to memcpy() would cost as much as the
// rest of a hit.
inline void copy_word(std::uint8_t* to, const std::uint8_t* from, std::size_t length) {
  switch (length) {
    case 1: std::memcpy(to, from, 1); return;
    case 2: std::memcpy(to, from, 2); return;
    case 4: std::memcpy(to, from, 4); return;
    case 8: std::memcpy(to, from, 8); return;
    default: std::memcpy(to, from, length);
  }
}

// `enable`: null, or one flag a byte.
inline void copy_enabled(std::uint8_t* to, const std::uint8_t* from, std::size_t length, const std::uint8_t* enable) {
  if (enable == nullptr) {
    copy_word(to, from, length);
    return;
  }
  for (std::size_t i = 0; i < length; ++i)
    if (enable[i] == TLM_BYTE_ENABLED) to[i] = from[i];
}

// Calls `tell(first, count)` for each run of enabled bytes among `length`.
template <typename Tell>
void for_enabled_runs(std::uint32_t length, const std::uint8_t* enable, Tell tell) {
  const auto enabled = [&](std::uint32_t i) { return enable == nullptr || enable[i] == TLM_BYTE_ENABLED; };
  for (std::uint32_t i = 0; i < length;) {
    std::uint32_t end = i;
    while (end < length && enabled(end)) ++end;
    if (end > i) tell(i, end - i);
    i = end + 1;
  }
}

}  // namespace earshot
