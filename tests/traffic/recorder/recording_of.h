// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the tests of the recorder share: recording a program, and judging a recording by itself.
#pragma once

#include <string>
#include <vector>

#include "earshot/traffic/recorder/record.h"
#include "earshot/traffic/recording.h"

namespace earshot {

struct Recorded {
  RecordResult result;
  std::string summary;  // with the folder cut from it
  std::vector<Access> accesses;
  RecordingNotes notes;
  std::string bytes;  // of the file
};

// Records in binary form, in a folder that is gone afterwards. `options.into` is not looked at.
Recorded recording_of(const std::vector<std::string>& program, RecordOptions options = {});

// False, with a warning, where the system forbids to switch off address randomisation, as some containers do.
bool can_be_repeated(const Recorded& recorded);

// The message of the RecordError when recording it, with the folder of the test programs cut from it; "no
// error" if none. Fails if a file is left behind.
std::string record_error_of(const std::vector<std::string>& program, RecordOptions options = {});

// The folders of the test programs, one for each compiler and level.
std::vector<std::string> builds();
std::string program_in(const std::string& build, const std::string& name);

// Replays over a map of bytes, those unknown learned when first read; returns the number of reads that find
// another value than the last write left. Independent of what the recorder itself does.
std::size_t wrong_reads(const std::vector<Access>& accesses);

}  // namespace earshot
