// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The text form of a recording, for people and scripts: CSV with a header. README.md of this room describes
// it. Use open_recording() and create_recording(); these are what they choose from.
#pragma once

#include <memory>

#include "earshot/traffic/compressed.h"
#include "earshot/traffic/recording.h"

namespace earshot {

// Lines longer than this are refused, so that memory stays bounded.
constexpr std::size_t longest_text_line = 64 * 1024;

// Reads the leading comments and the header at once, the accesses as they are asked for.
std::unique_ptr<RecordingReader> read_text(std::unique_ptr<CompressedSource> source, std::uint32_t only);

std::unique_ptr<RecordingWriter> write_text(const std::string& path, const RecordingNotes& notes,
                                            Compression compression);

}  // namespace earshot
