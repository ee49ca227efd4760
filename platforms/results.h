// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Turns a finished simulation into the results document.
#pragma once

#include "played.h"
#include "simulate.h"

namespace earshot {

// Call once, after play(). Its "findings" say what the user must look at although there are results.
Json collect_results(const Settings& settings, const Table& table, Platform& platform, const Played& played);

}  // namespace earshot
