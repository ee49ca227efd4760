// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the tests of recordings share: a folder that goes away, whole files in and out, random recordings.
#pragma once

#include <filesystem>
#include <functional>
#include <string>
#include <vector>

#include "earshot/traffic/recording.h"

namespace earshot {

// An empty folder of its own, removed with all that is in it.
class TemporaryFolder {
 public:
  TemporaryFolder();
  ~TemporaryFolder();
  TemporaryFolder(const TemporaryFolder&) = delete;
  TemporaryFolder& operator=(const TemporaryFolder&) = delete;

  std::string file(const std::string& name) const { return (path_ / name).string(); }
  std::vector<std::string> names() const;  // of the files in it, sorted

 private:
  std::filesystem::path path_;
};

void write_file(const std::string& path, const std::string& content);
std::string read_file(const std::string& path);

// `content` compressed in one piece by the library that made the format.
std::string gzipped(const std::string& content);
std::string zstd_compressed(const std::string& content);

// The message of the RecordingError that `action` throws, with `folder` cut from its front; "no error" if
// none.
std::string message_of(const std::function<void()>& action);

std::vector<Access> read_all(const std::string& path, std::uint32_t only = every_initiator);
void write_all(const std::string& path, const std::vector<Access>& accesses,
               const RecordingNotes& notes = {});

// Every kind of access a recording may hold: rare sizes, extreme addresses, values present and absent.
std::vector<Access> random_accesses(std::uint64_t seed, std::size_t count);

std::vector<Access> those_of(std::uint32_t initiator, const std::vector<Access>& accesses);

}  // namespace earshot
