// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/cache/access_kind.h"

namespace earshot {

const char* name_of(AccessKind kind) {
  static constexpr const char* names[access_kinds] = {"read-hit",      "write-hit",        "upgrade",
                                                      "update",        "write-through",    "miss-from-sharer",
                                                      "miss-from-owner", "miss-from-memory"};
  return names[static_cast<std::size_t>(kind)];
}

AccessKind kind_of(const BusTransaction& transaction) {
  switch (transaction.kind) {
    case BusKind::upgrade: return AccessKind::upgrade;
    case BusKind::update: return AccessKind::update;
    case BusKind::write_through: return AccessKind::write_through;
    default: break;
  }
  switch (transaction.supplier) {
    case Supplier::owner: return AccessKind::miss_from_owner;
    case Supplier::sharer: return AccessKind::miss_from_sharer;
    default: return AccessKind::miss_from_memory;
  }
}

}  // namespace earshot
