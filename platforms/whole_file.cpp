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

[[noreturn]] void refuse(const std::string& path) {
  const int reason = errno;
  std::remove(temporary_for(path).c_str());
  throw UsageError(path + ": cannot be written: " + std::strerror(reason));
}

}  // namespace

void check_writable(const std::string& path) {
  std::error_code ignored;
  if (std::filesystem::is_directory(path, ignored)) {
    errno = EISDIR;
    refuse(path);
  }
  std::FILE* file = std::fopen(temporary_for(path).c_str(), "wb");
  if (file == nullptr) refuse(path);
  std::fclose(file);
  std::remove(temporary_for(path).c_str());
}

void write_whole_file(const std::string& path, const std::string& text) {
  std::FILE* file = std::fopen(temporary_for(path).c_str(), "wb");
  if (file == nullptr) refuse(path);
  const bool written = std::fwrite(text.data(), 1, text.size(), file) == text.size();
  if (std::fclose(file) != 0 || !written) refuse(path);
  if (std::rename(temporary_for(path).c_str(), path.c_str()) != 0) refuse(path);
}

}  // namespace earshot
