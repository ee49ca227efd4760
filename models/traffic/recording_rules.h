// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What makes an access and a recording's notes acceptable: the rules that every form of a recording and both
// directions share. For the files of this room.
#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "earshot/traffic/recording.h"

namespace earshot {

constexpr std::size_t most_note_bytes = 32 * 1024;

// The largest value that an access of `size` bytes can carry. REQUIRES: 1 <= size <= 8.
constexpr std::uint64_t largest_value(std::uint32_t size) {
  return ~std::uint64_t{0} >> (64 - 8 * size);
}

// What is wrong with the access and what was expected, or an empty string.
std::string problem_with(const Access& access);

// The same for notes: at most most_note_bytes, and no control characters but newline and tab.
std::string problem_with(const RecordingNotes& notes);

// The name in quotes, fit for a message: at most 40 characters, control characters replaced.
std::string quoted(std::string_view text);

// ", did you mean 'x'?" with the name of `known` that takes the fewest single-letter changes to reach from
// `word`; empty if that would be more than half of its letters.
std::string did_you_mean(std::string_view word, const std::vector<std::string>& known);

}  // namespace earshot
