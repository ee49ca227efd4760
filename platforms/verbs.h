// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The verbs of the command. Each takes the words after its own name and returns the exit status: 0 fine, 1 a
// finding. Unusable input is thrown as an exception, which main() turns into status 2.
#pragma once

#include <string>
#include <vector>

namespace earshot {

int simulate_verb(const std::vector<std::string>& words);
int prove_verb(const std::vector<std::string>& words);
int record_verb(const std::vector<std::string>& words);
int convert_verb(const std::vector<std::string>& words);

}  // namespace earshot
