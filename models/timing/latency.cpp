// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/latency.h"

namespace earshot {

const char* name_of(LatencyPart part) {
  switch (part) {
    case LatencyPart::hit:            return "hit";
    case LatencyPart::wait_for_grant: return "wait-for-grant";
    case LatencyPart::snoop:          return "snoop";
    case LatencyPart::owner_supply:   return "owner-supply";
    case LatencyPart::memory_queue:   return "memory-queue";
    case LatencyPart::memory_array:   return "memory-array";
    case LatencyPart::transfer:       return "transfer";
  }
  return "?";
}

}  // namespace earshot
