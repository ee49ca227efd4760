// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The configurations that are installed with the command, in ../share/earshot/configs from where it stands.
#pragma once

#include <string>

namespace earshot {

// `path`, unless nothing is there and it is the bare name of a shipped configuration: then that one's path.
std::string configuration_path(const std::string& path);

}  // namespace earshot
