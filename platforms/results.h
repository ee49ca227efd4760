// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Turns a finished simulation into the results document.
#pragma once

#include "platform.h"
#include "simulate.h"

namespace earshot {

// Call once, after sc_start() returned. Writes dirty lines back if the settings say so, and compares memory.
// Throws what stopped the simulation, and Finding for violations and differing values.
Json collect_results(const Settings& settings, const Table& table, Platform& platform);

}  // namespace earshot
