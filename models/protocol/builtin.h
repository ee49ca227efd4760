// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Private to this room: the table texts that the build embeds, in the order of every listing.
#pragma once

#include <string>
#include <vector>

namespace earshot {

struct BuiltinText {
  std::string name;
  std::string text;
};
const std::vector<BuiltinText>& builtin_texts();

}  // namespace earshot
