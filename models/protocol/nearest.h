// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Help for a misspelt word.
#pragma once

#include <string>
#include <vector>

namespace earshot {

// The word of `known` that takes the fewest single-letter changes to reach from `word`, the first of equals;
// empty if none is reached with at most half as many changes as `word` has letters.
std::string nearest(const std::string& word, const std::vector<std::string>& known);

}  // namespace earshot
