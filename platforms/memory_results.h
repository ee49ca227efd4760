// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The part of the results that concerns memory. Internal to the results.
#pragma once

#include "bottleneck.h"
#include "played.h"
#include "simulate.h"

namespace earshot {

Json memory_results(const Platform& platform, const SnoopingBusTotals& totals, const Played& played);

// What can saturate in the `index`-th cached window's memory. A DRAM has its busiest channel's data bus, and its
// banks: each is taken for tRC by every activation, evenly spread at best.
std::vector<Resource> memory_resources(const Platform& platform, const Played& played, std::size_t index);

}  // namespace earshot
