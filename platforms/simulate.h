// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Runs one configuration and says what came of it.
#pragma once

#include <nlohmann/json.hpp>
#include <stdexcept>
#include <string>

#include "settings.h"

namespace earshot {

using Json = nlohmann::ordered_json;

// Something the user must look at: a coherence violation, values that differ. Exit status 1.
class Finding : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

constexpr int results_schema = 1;
constexpr const char* caution =
    "Cycle-approximate estimates for early decisions. Calibrate against RTL or silicon before relying on them for "
    "sign-off; they are no evidence for safety arguments.";

// The results as one JSON document (fields: README.md). A table file is proved for 2 and 3 caches before it runs.
// With settings.baseline, write-through-update plays the same input in a second process, and the document has a
// "baseline"; its "findings" are what the user must look at although there are results: exit status 1. Writes the
// command log, if there is to be one. Once per process. `progress`: say on stderr how far it is, if that is a terminal.
// Throws UsageError, Finding, RecordingError.
Json simulate(const Settings& settings, bool progress);

}  // namespace earshot
