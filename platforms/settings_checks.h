// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The second stage of reading settings: every key is well formed; now what they name is loaded, and what no single
// key can tell is checked. Internal to settings.cpp.
#pragma once

#include <map>
#include <string>
#include <vector>

#include "settings.h"

namespace earshot {

// What was given for a key, and where.
struct Given {
  std::string text;
  std::string where;     // "platform.ini:12" or "command line"
  bool in_file = false;
};
using GivenKeys = std::map<std::string, Given>;

// Loads the protocol and the DRAM grade into `settings`. Returns every problem, each with its place.
std::vector<std::string> complete(Settings& settings, const GivenKeys& given);

}  // namespace earshot
