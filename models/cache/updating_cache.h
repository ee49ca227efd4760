// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An UpdatingCache keeps other caches' copies alive by broadcasting written words. Under a protocol with a
// dirty owner the last writer answers for the line: it supplies other caches' reads, hands ownership to the
// next writer, and memory is written once, when the owner's copy is replaced.
#pragma once

#include "earshot/cache/coherent_cache.h"

namespace earshot {

class UpdatingCache : public CoherentCache {
 public:
  // REQUIRES: config.table is of the update family; anything else is a configuration error.
  UpdatingCache(sc_core::sc_module_name name, const CacheConfig& config,
                HeadersVersion headers = EARSHOT_HEADERS_VERSION)
      : CoherentCache(name, config, Family::update, headers) {}
  const char* kind() const override { return "earshot::UpdatingCache"; }
};

}  // namespace earshot
