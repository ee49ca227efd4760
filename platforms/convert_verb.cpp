// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <cstdio>

#include "earshot/traffic/recording.h"
#include "quantities.h"
#include "settings.h"
#include "verbs.h"

namespace earshot {

int convert_verb(const std::vector<std::string>& words) {
  if (words.size() == 1 && words[0] == "--help") {
    std::puts("earshot convert FROM TO\n\n"
              "Copies a recording. The form of TO follows its name: .csv is text, anything else the\n"
              "compact binary form; a final .gz or .zst compresses it.");
    return 0;
  }
  if (words.size() != 2) throw UsageError("convert: expected FROM TO, two paths of recordings");
  const std::uint64_t accesses = convert_recording(words[0], words[1]);
  std::printf("%s accesses: %s\n", with_commas(accesses).c_str(), words[1].c_str());
  return 0;
}

}  // namespace earshot
