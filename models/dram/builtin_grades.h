// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Private to this room: the grade files that the build embeds, in the order of every listing, and what a file
// covers.
#pragma once

#include <string>
#include <vector>

#include "earshot/dram/grade_file.h"

namespace earshot {

struct BuiltinGrade {
  std::string name;
  std::string text;
};
const std::vector<BuiltinGrade>& builtin_grade_texts();

GradeRange range_of_grade_text(const std::string& text, const std::string& origin);

}  // namespace earshot
