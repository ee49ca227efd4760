// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The binary form of a recording, for machines: small, quick to decode, every byte under a CRC. README.md of
// this room describes it. Use open_recording() and create_recording(); these are what they choose from.
#pragma once

#include <memory>

#include "earshot/traffic/compressed.h"
#include "earshot/traffic/recording.h"

namespace earshot {

constexpr std::uint16_t binary_version = 1;

// Whether the content begins as the binary form does, or is too short to tell and could.
bool is_binary(CompressedSource& source);

// Reads the header at once, the accesses as they are asked for. Throws RecordingError.
std::unique_ptr<RecordingReader> read_binary(std::unique_ptr<CompressedSource> source, std::uint32_t only);

std::unique_ptr<RecordingWriter> write_binary(const std::string& path, const RecordingNotes& notes,
                                              Compression compression);

}  // namespace earshot
