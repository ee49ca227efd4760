// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "recording_of.h"

#include <catch2/catch.hpp>
#include <map>

#include "traffic/recording_files.h"

namespace earshot {

namespace {

std::string without(std::string text, const std::string& part) {
  for (std::size_t at = text.find(part); at != std::string::npos; at = text.find(part))
    text.erase(at, part.size());
  return text;
}

}  // namespace

Recorded recording_of(const std::vector<std::string>& program, RecordOptions options) {
  const TemporaryFolder folder;
  options.into = folder.file("recording");
  options.program = program;
  Recorded recorded;
  recorded.result = record_program(options);
  recorded.summary = without(summary_of(options, recorded.result), folder.file(""));
  recorded.accesses = read_all(options.into);
  recorded.notes = open_recording(options.into)->notes();
  recorded.bytes = read_file(options.into);
  REQUIRE(recorded.accesses.size() == recorded.result.reads + recorded.result.writes);
  return recorded;
}

bool can_be_repeated(const Recorded& recorded) {
  if (!recorded.result.addresses_fixed)
    WARN("addresses are random here: that recordings repeat is not checked");
  return recorded.result.addresses_fixed;
}

std::string record_error_of(const std::vector<std::string>& program, RecordOptions options) {
  const TemporaryFolder folder;
  options.into = folder.file("recording");
  options.program = program;
  std::string message = "no error";
  try {
    record_program(options);
  } catch (const RecordError& error) {
    message = error.what();
    CHECK(folder.names().empty());
  }
  return without(message, std::string(EARSHOT_RECORDED) + "/");
}

std::vector<std::string> builds() {
  std::vector<std::string> names = {"native-O0", "native-O2"};
  if (EARSHOT_HAVE_CLANG != 0) names.insert(names.end(), {"clang-O0", "clang-O2"});
  return names;
}

std::string program_in(const std::string& build, const std::string& name) {
  return std::string(EARSHOT_RECORDED) + "/" + build + "/" + name;
}

std::size_t wrong_reads(const std::vector<Access>& accesses) {
  std::map<std::uint64_t, unsigned char> memory;
  std::size_t wrong = 0;
  for (const Access& access : accesses) {
    REQUIRE(access.has_value);
    bool agrees = true;
    for (std::uint32_t i = 0; i < access.size; ++i) {
      const auto byte = static_cast<unsigned char>(access.value >> 8 * i);
      const auto known = memory.find(access.address + i);
      if (access.op == AccessOp::read && known != memory.end() && known->second != byte) agrees = false;
      memory[access.address + i] = byte;
    }
    if (!agrees) ++wrong;
  }
  return wrong;
}

}  // namespace earshot
