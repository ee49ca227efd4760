// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recording_rules.h"

#include <algorithm>
#include <cstdio>

namespace earshot {
namespace {

bool is_control(char letter) {
  return static_cast<unsigned char>(letter) < 0x20 || letter == 0x7f;
}

std::string hex(std::uint64_t number) {
  char text[24];
  std::snprintf(text, sizeof text, "0x%llx", static_cast<unsigned long long>(number));
  return text;
}

// Levenshtein's distance, one row at a time.
std::size_t changes_between(std::string_view from, std::string_view to) {
  std::vector<std::size_t> row(to.size() + 1);
  for (std::size_t j = 0; j < row.size(); ++j) row[j] = j;
  for (std::size_t i = 1; i <= from.size(); ++i) {
    std::size_t diagonal = row[0];
    row[0] = i;
    for (std::size_t j = 1; j <= to.size(); ++j) {
      const std::size_t replaced = diagonal + (from[i - 1] == to[j - 1] ? 0 : 1);
      diagonal = row[j];
      row[j] = std::min({replaced, row[j] + 1, row[j - 1] + 1});
    }
  }
  return row[to.size()];
}

}  // namespace

std::string problem_with(const Access& access) {
  if (access.initiator >= most_initiators) {
    return "initiator " + std::to_string(access.initiator) + ", expected 0 to " +
           std::to_string(most_initiators - 1);
  }
  if (access.size < 1 || access.size > largest_access) {
    return "size " + std::to_string(access.size) + ", expected 1 to " + std::to_string(largest_access);
  }
  if (access.address > ~std::uint64_t{0} - (access.size - 1)) {
    return "address " + hex(access.address) + " with size " + std::to_string(access.size) +
           " goes past the last byte of the address space, expected at most " +
           hex(~std::uint64_t{0} - (access.size - 1));
  }
  if (!access.has_value) return {};
  if (access.size > 8) {
    return "a value with size " + std::to_string(access.size) + ", expected a value only with sizes up to 8";
  }
  if (access.value > largest_value(access.size)) {
    return "value " + hex(access.value) + " with size " + std::to_string(access.size) +
           ", expected at most " + hex(largest_value(access.size));
  }
  return {};
}

std::string problem_with(const RecordingNotes& notes) {
  if (notes.text.size() > most_note_bytes) {
    return "a note of " + std::to_string(notes.text.size()) + " bytes, expected at most " +
           std::to_string(most_note_bytes);
  }
  const auto unfit = [](char letter) { return is_control(letter) && letter != '\n' && letter != '\t'; };
  if (std::any_of(notes.text.begin(), notes.text.end(), unfit)) {
    return "a note with a control character, expected none but newline and tab";
  }
  return {};
}

std::string quoted(std::string_view text) {
  constexpr std::size_t most = 40;
  std::string shown(text.substr(0, most));
  std::replace_if(shown.begin(), shown.end(), is_control, '?');
  return "'" + shown + (text.size() > most ? "..." : "") + "'";
}

std::string did_you_mean(std::string_view word, const std::vector<std::string>& known) {
  const std::string* best = nullptr;
  std::size_t fewest = word.size() / 2 + 1;
  if (word.size() > 40) return {};
  for (const std::string& name : known) {
    const std::size_t changes = changes_between(word, name);
    if (changes >= fewest) continue;
    fewest = changes;
    best = &name;
  }
  return best == nullptr ? std::string() : ", did you mean '" + *best + "'?";
}

}  // namespace earshot
