// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Runs build/earshot as a user would, for the tests of the command. Runs over DRAM are judged: judged_command.h.
#pragma once

#include <sys/wait.h>

#include <array>
#include <catch2/catch.hpp>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>
#include <regex>
#include <string>

#include "judged_command.h"

namespace command_tests {

using Json = nlohmann::json;
namespace fs = std::filesystem;

struct Outcome {
  int status;
  std::string out;  // standard output and error together
};

// A folder of its own for each test, gone afterwards.
class Folder {
 public:
  Folder() {
    std::string pattern = (fs::temp_directory_path() / "earshot-test-XXXXXX").string();
    REQUIRE(mkdtemp(pattern.data()) != nullptr);
    path_ = pattern;
  }
  ~Folder() {
    std::error_code ignored;
    fs::remove_all(path_, ignored);
  }
  std::string operator/(const std::string& name) const { return (path_ / name).string(); }
  std::string write(const std::string& name, const std::string& text) const {
    std::ofstream(path_ / name) << text;
    return *this / name;
  }
  std::size_t files() const {
    return static_cast<std::size_t>(std::distance(fs::directory_iterator(path_), fs::directory_iterator{}));
  }
  // `text` with this folder's name taken out, so that messages can be compared whole.
  std::string cleaned(std::string text) const {
    const std::string folder = path_.string() + "/";
    for (std::size_t at; (at = text.find(folder)) != std::string::npos;) text.erase(at, folder.size());
    return text;
  }

 private:
  fs::path path_;
};

inline Outcome earshot(const std::string& arguments) {
  const JudgedCommand judged(arguments);
  const std::string command = std::string(EARSHOT_COMMAND) + " " + judged.arguments() + " 2>&1";
  std::FILE* pipe = popen(command.c_str(), "r");
  REQUIRE(pipe != nullptr);
  Outcome outcome;
  std::array<char, 4096> buffer;
  for (std::size_t n; (n = fread(buffer.data(), 1, buffer.size(), pipe)) > 0;) outcome.out.append(buffer.data(), n);
  const int status = pclose(pipe);
  // A sanitized build says once that SystemC's stacks are unknown to it (see CMakeLists.txt).
  static const std::regex about_stacks("==[0-9]+==WARNING: ASan is ignoring requested __asan_handle_no_return: [^\n]*\n"
                                       "False positive error reports may follow\nFor details see [^\n]*\n");
  outcome.out = std::regex_replace(outcome.out, about_stacks, "");
  outcome.status = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
  judged.judge(outcome.status);
  return outcome;
}

// The text with every run of white space made one space: sentences are wrapped.
inline std::string unwrapped(const std::string& text) { return std::regex_replace(text, std::regex("\\s+"), " "); }

inline std::string file_text(const std::string& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

// Status 2, this message, nothing left behind.
inline void refuses(const Folder& folder, const std::string& arguments, const std::string& message) {
  const std::size_t files = folder.files();
  const Outcome outcome = earshot(arguments);
  INFO(arguments);
  CHECK(outcome.status == 2);
  CHECK(folder.cleaned(outcome.out) == "earshot: " + message + "\n");
  CHECK(folder.files() == files);
}

// The results document of a run that must end with `status`.
inline Json results_of(const std::string& arguments, int status = 0) {
  const Folder folder;
  const Outcome outcome = earshot("simulate " + arguments + " --quiet --json " + (folder / "out.json"));
  INFO(arguments << "\n" << outcome.out);
  REQUIRE(outcome.status == status);
  return Json::parse(file_text(folder / "out.json"));
}

}  // namespace command_tests
