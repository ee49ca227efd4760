// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The text answer: what a person reads of a results document, 80 columns, the decision first.
#pragma once

#include <string>

#include "simulate.h"

namespace earshot {

std::string text_answer(const Json& results);

// The results document as text, to be written to a file as it is.
std::string json_text(const Json& results);

}  // namespace earshot
