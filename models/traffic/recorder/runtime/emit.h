// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Puts accesses into the ring. One at a time, values are those in memory at the moment of the call; running
// freely, memory is not looked at, since another thread may just have unmapped it.
#pragma once

#include "thread.h"

namespace earshot::recorder {

// One access of 1 to 8 bytes. Waits while the ring is full.
void emit(const Thread* t, RecordKind kind, const void* address, std::size_t size, std::uint64_t value);

// The value of `size` (1 to 8) bytes in memory, which begin at any address.
inline std::uint64_t value_at(const void* address, std::size_t size) {
  const auto* at = static_cast<const unsigned char*>(address);
  std::uint64_t value = 0;
  switch (size) {
    case 1:
      return *at;
    case 4:
      __builtin_memcpy(&value, at, 4);
      return value;
    case 8:
      __builtin_memcpy(&value, at, 8);
      return value;
    default:
      for (std::size_t i = 0; i < size; ++i) value |= std::uint64_t{at[i]} << 8 * i;
      return value;
  }
}

// An access of any size with the value in memory: one of at most 8 bytes as it is, a longer one in pieces of
// at most 8 that do not cross a multiple of 8. Returns the number of pieces.
std::uint64_t emit_from_memory(const Thread* t, RecordKind kind, const void* address, std::size_t size);

// Records the pending write, which has been made by now. One at a time only.
void settle(Thread* t);

}  // namespace earshot::recorder
