// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// An InvalidatingCache makes other caches drop their copies before it writes.
#pragma once

#include "earshot/cache/coherent_cache.h"

namespace earshot {

class InvalidatingCache : public CoherentCache {
 public:
  // REQUIRES: config.table is of the invalidate family; anything else is a configuration error.
  InvalidatingCache(sc_core::sc_module_name name, const CacheConfig& config,
                    HeadersVersion headers = EARSHOT_HEADERS_VERSION)
      : CoherentCache(name, config, Family::invalidate, headers) {}
  const char* kind() const override { return "earshot::InvalidatingCache"; }
};

}  // namespace earshot
