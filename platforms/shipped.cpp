// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "shipped.h"

#include <filesystem>

namespace earshot {

namespace fs = std::filesystem;

std::string configuration_path(const std::string& path) {
  std::error_code failed;
  if (fs::exists(path, failed) || fs::path(path).has_parent_path()) return path;
  const fs::path command = fs::read_symlink("/proc/self/exe", failed);
  if (failed) return path;
  const fs::path shipped = command.parent_path().parent_path() / "share/earshot/configs" / path;
  return fs::is_regular_file(shipped, failed) ? shipped.string() : path;
}

}  // namespace earshot
