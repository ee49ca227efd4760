// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What an access came to, by the dearest thing it needed. An access of several transactions or lines counts as the
// last of these that applies.
#pragma once

#include <cstdint>

#include "earshot/bus/transaction.h"

namespace earshot {

enum class AccessKind : std::uint8_t {
  read_hit,
  write_hit,         // no bus transaction
  upgrade,           // a copy was there, the right to write it was asked for
  update,            // a copy was there, the word was broadcast
  write_through,     // the word was broadcast, memory took it too
  miss_from_sharer,  // fetched from another cache's clean copy
  miss_from_owner,   // fetched from the cache that owns the line
  miss_from_memory,
};
constexpr int access_kinds = 8;
const char* name_of(AccessKind kind);  // "read-hit", "miss-from-owner"
// Of an access that needed this transaction, which has ended.
AccessKind kind_of(const BusTransaction& transaction);

}  // namespace earshot
