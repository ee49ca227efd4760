// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "whole_file.h"

#include <unistd.h>

#include <cerrno>
#include <cstdio>
#include <cstring>
#include <filesystem>

#include "settings.h"

namespace earshot {
namespace {

std::string temporary_for(const std::string& path) { return path + ".part" + std::to_string(getpid()); }

[[noreturn]] void refuse(const std::string& path, int reason) {
  throw UsageError(path + ": cannot be written: " + std::strerror(reason));
}

// A device or a pipe is written to as it is: there is nothing to keep whole, and it must not be replaced.
bool is_special(const std::string& path) {
  std::error_code ignored;
  const auto status = std::filesystem::status(path, ignored);
  return std::filesystem::exists(status) && !std::filesystem::is_regular_file(status);
}

// Where a path leads, so that a symbolic link stays one.
std::string target_of(const std::string& path) {
  std::error_code error;
  const auto target = std::filesystem::weakly_canonical(path, error);
  return error ? path : target.string();
}

bool write_all(const std::string& path, const std::string& text) {
  std::FILE* file = std::fopen(path.c_str(), "wb");
  if (file == nullptr) return false;
  const bool written = std::fwrite(text.data(), 1, text.size(), file) == text.size();
  return std::fclose(file) == 0 && written;
}

}  // namespace

void check_writable(const std::string& path) {
  std::error_code ignored;
  if (std::filesystem::is_directory(path, ignored)) refuse(path, EISDIR);
  if (is_special(path)) return;
  const std::string temporary = temporary_for(target_of(path));
  if (!write_all(temporary, "")) refuse(path, errno);
  std::remove(temporary.c_str());
}

void write_whole_file(const std::string& path, const std::string& text) {
  if (is_special(path)) {
    if (!write_all(path, text)) refuse(path, errno);
    return;
  }
  const std::string target = target_of(path);
  const std::string temporary = temporary_for(target);
  if (write_all(temporary, text) && std::rename(temporary.c_str(), target.c_str()) == 0) return;
  const int reason = errno;
  std::remove(temporary.c_str());
  refuse(path, reason);
}

}  // namespace earshot
