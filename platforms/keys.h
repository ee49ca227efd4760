// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The table of configuration keys: one entry a key with its default, its help, how its text becomes a setting, and
// the other keys without which it means nothing. Everything that lists keys walks this table.
#pragma once

#include <functional>
#include <string>
#include <vector>

#include "settings.h"

namespace earshot {

// Another key must have one of these values.
struct Need {
  const char* key;
  std::vector<const char*> values;
};

struct Key {
  const char* name;          // "section.key", or "key" at top level
  const char* default_text;
  const char* help;
  // Stores `text` in the settings. Returns what was expected instead, or an empty string.
  std::function<std::string(const std::string& text, Settings& settings)> apply;
  // All of them, for any text but the default. Else the key would be silently without effect: an error.
  std::vector<Need> needs = {};
};

// In the order in which they are applied and listed: bus.clock first, since times may be given in its cycles.
const std::vector<Key>& keys();

}  // namespace earshot
