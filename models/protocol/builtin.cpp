// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/protocol/builtin.h"

#include <cerrno>
#include <cstring>
#include <filesystem>
#include <fstream>

#include "earshot/protocol/nearest.h"
#include "earshot/protocol/table.h"

namespace earshot {
namespace {

// Far more than any table needs; keeps a mistaken path (a device, a recording) from filling the memory.
constexpr std::size_t max_bytes = 1 << 20;

const BuiltinText* find_builtin(const std::string& name) {
  for (const BuiltinText& table : builtin_texts()) {
    if (table.name == name) return &table;
  }
  return nullptr;
}

[[noreturn]] void refuse_unknown(const std::string& name) {
  std::string message = name + ": neither a built-in table nor a file; built-in are";
  const char* separator = " ";
  for (const std::string& known : builtin_tables()) {
    message += separator + known;
    separator = ", ";
  }
  const std::string hint = nearest(name, builtin_tables());
  if (!hint.empty()) message += "; did you mean " + hint + "?";
  throw TableError(message);
}

std::string read_file(const std::string& path) {
  std::error_code ignored;
  if (std::filesystem::is_directory(path, ignored)) {
    throw TableError(path + ": is a directory, expected a table file");
  }
  errno = 0;
  std::ifstream file(path, std::ios::binary);
  if (!file) throw TableError(path + ": cannot be read: " + std::strerror(errno));
  std::string text(max_bytes + 1, '\0');
  file.read(text.data(), static_cast<std::streamsize>(text.size()));
  if (file.bad()) throw TableError(path + ": cannot be read: " + std::strerror(errno));
  text.resize(static_cast<std::size_t>(file.gcount()));
  if (text.size() > max_bytes) throw TableError(path + ": more than 1 MiB, too long for a protocol table");
  return text;
}

}  // namespace

const std::vector<std::string>& builtin_tables() {
  static const std::vector<std::string> names = [] {
    std::vector<std::string> all;
    for (const BuiltinText& table : builtin_texts()) all.push_back(table.name);
    return all;
  }();
  return names;
}

const std::string& builtin_table_text(const std::string& name) {
  const BuiltinText* table = find_builtin(name);
  if (table == nullptr) throw TableError(name + ": not a built-in table");
  return table->text;
}

Table load_table(const std::string& name_or_path, int limit) {
  if (const BuiltinText* table = find_builtin(name_or_path)) {
    return Table::parse(table->text, table->name + ".table", limit);
  }
  std::error_code ignored;
  if (!std::filesystem::exists(name_or_path, ignored)) refuse_unknown(name_or_path);
  return Table::parse(read_file(name_or_path), name_or_path, limit);
}

}  // namespace earshot
