// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recording.h"

#include <filesystem>

#include "earshot/traffic/binary_recording.h"
#include "earshot/traffic/compressed.h"
#include "earshot/traffic/recording_rules.h"
#include "earshot/traffic/text_recording.h"

namespace earshot {
namespace {

bool is_text_name(const std::string& path) {
  std::filesystem::path name(path);
  if (compression_of_name(path) != Compression::none) name.replace_extension();
  return name.extension() == ".csv";
}

bool same_file(const std::string& one, const std::string& other) {
  std::error_code ignored;
  return one == other || std::filesystem::equivalent(one, other, ignored);
}

}  // namespace

const char* name_of(AccessOp op) {
  switch (op) {
    case AccessOp::read:
      return "read";
    case AccessOp::write:
      return "write";
    case AccessOp::replace:
      return "replace";
  }
  return "?";
}

std::unique_ptr<RecordingReader> open_recording(const std::string& path, std::uint32_t only) {
  auto source = std::make_unique<CompressedSource>(path);
  return is_binary(*source) ? read_binary(std::move(source), only) : read_text(std::move(source), only);
}

std::unique_ptr<RecordingWriter> create_recording(const std::string& path, const RecordingNotes& notes) {
  const std::string problem = problem_with(notes);
  if (!problem.empty()) throw RecordingError(path + ": " + problem);
  const Compression compression = compression_of_name(path);
  return is_text_name(path) ? write_text(path, notes, compression) : write_binary(path, notes, compression);
}

std::uint64_t convert_recording(const std::string& from, const std::string& to) {
  if (same_file(from, to))
    throw RecordingError(to + ": is the recording to convert, expected another name for the copy");
  const auto reader = open_recording(from);
  const auto writer = create_recording(to, reader->notes());
  std::uint64_t count = 0;
  for (Access access; reader->next(access); ++count) writer->write(access);
  writer->finish();
  return count;
}

}  // namespace earshot
