// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <sys/resource.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <catch2/catch.hpp>

#include "earshot/traffic/pattern.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

constexpr long mebibyte = 1024;  // in getrusage's unit, KiB

long most_memory_so_far() {
  rusage usage{};
  ::getrusage(RUSAGE_SELF, &usage);
  return usage.ru_maxrss;
}

// Reads a recording to its end, or to the first error if 'expected' is 0, in a process of its own, which
// remembers its peak alone. Returns by how much the memory it used grew after the first access, in MiB
// rounded up; fails unless it read 'expected' accesses.
int growth_while_reading(const std::string& path, std::uint64_t expected) {
  const pid_t child = ::fork();
  REQUIRE(child >= 0);
  if (child == 0) {
    std::uint64_t count = 0;
    long at_first = most_memory_so_far();
    bool failed = false;
    try {
      const auto reader = open_recording(path);
      Access access;
      while (reader->next(access)) {
        if (++count == 1) at_first = most_memory_so_far();
      }
    } catch (const RecordingError&) {
      failed = true;
    }
    const long growth = (most_memory_so_far() - at_first + mebibyte - 1) / mebibyte;
    const bool as_expected = count == expected && failed == (expected == 0);
    ::_exit(as_expected ? static_cast<int>(std::min(growth, 254L)) : 255);
  }
  int status = 0;
  REQUIRE(::waitpid(child, &status, 0) == child);
  REQUIRE(WIFEXITED(status));
  REQUIRE(WEXITSTATUS(status) != 255);
  return WEXITSTATUS(status);
}

const std::string header = "initiator,op,address,size,value\n";
constexpr std::size_t rows_in_piece = 16 * 1024;
constexpr int allowed_growth = 8;  // MiB

std::string piece_of_text() {
  std::string piece;
  for (std::size_t row = 0; row < rows_in_piece; ++row) {
    piece +=
        "3,write,0x7ffe12345678,8,0x" + std::to_string(100000 + row) + " # a comment makes rows longer\n";
  }
  return piece;
}

TEST_CASE("a text recording of 30 MB needs no more memory than its first row", "[traffic]") {
  TemporaryFolder folder;
  const std::string piece = piece_of_text();
  std::string text = header;
  std::size_t pieces = 0;
  while (text.size() < 30'000'000) text += piece, ++pieces;
  write_file(folder.file("r.csv"), text);
  text = std::string();
  CHECK(growth_while_reading(folder.file("r.csv"), pieces * rows_in_piece) <= allowed_growth);
}

TEST_CASE("a compressed recording of 100 MB of text needs no more memory than its first row", "[traffic]") {
  const std::string piece = piece_of_text();
  const std::size_t pieces = 100'000'000 / piece.size() + 1;
  for (auto* compress : {gzipped, zstd_compressed}) {
    TemporaryFolder folder;
    const std::string compressed_piece = compress(piece);
    std::string file = compress(header);
    for (std::size_t i = 0; i < pieces; ++i) file += compressed_piece;
    write_file(folder.file("r"), file);
    CHECK(growth_while_reading(folder.file("r"), pieces * rows_in_piece) <= allowed_growth);
  }
}

TEST_CASE("a compressed line of 100 MB is refused without being held in memory", "[traffic]") {
  TemporaryFolder folder;
  const std::string megabyte = zstd_compressed(std::string(1'000'000, ' '));
  std::string file = zstd_compressed(header);
  for (int i = 0; i < 100; ++i) file += megabyte;
  write_file(folder.file("r"), file);
  CHECK(growth_while_reading(folder.file("r"), 0) <= allowed_growth);
}

TEST_CASE("a binary recording of 40 blocks needs no more memory than its first block", "[traffic]") {
  PatternConfig config;
  config.accesses = 40 * 65536 / config.initiators;
  for (const char* name : {"r.ear", "r.ear.zst"}) {
    TemporaryFolder folder;
    const auto pattern = make_pattern(config);
    const auto writer = create_recording(folder.file(name), {});
    for (Access access; pattern->next(access);) writer->write(access);
    writer->finish();
    CHECK(growth_while_reading(folder.file(name), 40 * 65536) <= allowed_growth);
  }
}

}  // namespace
}  // namespace earshot
