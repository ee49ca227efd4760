// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Files are written whole or not at all: to a temporary beside the target, then renamed.
#pragma once

#include <string>

namespace earshot {

// Both throw UsageError naming the path and the system's reason.
void check_writable(const std::string& path);  // before a long run, not after it
void write_whole_file(const std::string& path, const std::string& text);

}  // namespace earshot
