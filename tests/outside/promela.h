// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A compiled table as a Promela model (the language of the model checker Spin; G. J. Holzmann, "The Spin
// Model Checker", 2004): n caches and memory, one line, the five rules as assertions. It shares no code with
// the prover, so that two programs that agree have been wrong twice, independently, or not at all.
#pragma once

#include <string>

#include "earshot/protocol/table.h"

namespace earshot {

// The model's state vector is one process that always stands at the same place, the caches' states, the
// freshness of their copies, and memory's freshness: Spin's "states, stored" is the prover's unfolded count.
std::string promela(const Table& table, int caches);

}  // namespace earshot
