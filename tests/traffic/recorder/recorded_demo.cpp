// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>
#include <filesystem>
#include <map>
#include <set>

#include "recording_of.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

const char* const committed = EARSHOT_SOURCE "/configs/recordings/sonar-buoy.earshot.zst";

TEST_CASE("recording the demonstration again gives the same bytes every time") {
  const Recorded first = recording_of({EARSHOT_SONAR_BUOY});
  const Recorded second = recording_of({EARSHOT_SONAR_BUOY});
  if (can_be_repeated(first)) CHECK(first.bytes == second.bytes);
  CHECK(first.result.exit_status == 0);
  CHECK(wrong_reads(first.accesses) == 0);
  CHECK(first.notes.text == open_recording(committed)->notes().text);
}

TEST_CASE("replaying the demonstration's recording over a map of bytes gives no wrong read") {
  const std::vector<Access> accesses = read_all(committed);
  CHECK(open_recording(committed)->notes().exact_order);
  CHECK(wrong_reads(accesses) == 0);
}

TEST_CASE("the demonstration's recording is small, long enough, and shared between four busy threads") {
  CHECK(std::filesystem::file_size(committed) <= 400 * 1024);
  const std::vector<Access> accesses = read_all(committed);
  CHECK(accesses.size() >= 200'000);
  std::map<std::uint32_t, std::size_t> of_thread;
  std::map<std::uint64_t, std::set<std::uint32_t>> writers_of_line;
  std::map<std::uint64_t, std::set<std::uint32_t>> users_of_line;
  for (const Access& access : accesses) {
    ++of_thread[access.initiator];
    users_of_line[access.address / 64].insert(access.initiator);
    if (access.op == AccessOp::write) writers_of_line[access.address / 64].insert(access.initiator);
  }
  CHECK(of_thread.size() == 4);
  for (const auto& [thread, count] : of_thread) CHECK(count > accesses.size() / 20);
  std::size_t shared = 0;
  for (const auto& [line, users] : users_of_line) shared += users.size() > 1 ? 1 : 0;
  CHECK(users_of_line.size() * 64 > 20 * 1024);
  CHECK(users_of_line.size() * 64 < 64 * 1024);
  CHECK(shared * 2 > users_of_line.size());
  std::size_t written_by_all = 0;
  for (const auto& [line, writers] : writers_of_line) written_by_all += writers.size() == 4 ? 1 : 0;
  CHECK(written_by_all >= 1);  // the status
}

}  // namespace
}  // namespace earshot
