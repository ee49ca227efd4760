// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <catch2/catch.hpp>
#include <sstream>

#include "recording_of.h"

namespace earshot {
namespace {

// The write by which a program says where its memory is: of its address, there.
std::vector<Access>::const_iterator landmark(const std::vector<Access>& accesses) {
  const auto self = std::find_if(accesses.begin(), accesses.end(), [](const Access& access) {
    return access.op == AccessOp::write && access.size == 8 && access.value == access.address;
  });
  REQUIRE(self != accesses.end());
  return self;
}

// The accesses to `box` of programs/sequence.c, one a line, with addresses relative to it.
std::string accesses_to_box(const std::vector<Access>& accesses) {
  const auto self = landmark(accesses);
  std::ostringstream out;
  for (auto at = self + 1; at != accesses.end(); ++at) {
    const std::uint64_t offset = at->address - self->address;
    if (offset >= 144) continue;
    out << name_of(at->op) << ' ' << std::dec << offset << ' ' << at->size << std::hex << " 0x" << at->value
        << '\n';
  }
  return out.str();
}

TEST_CASE("a program's accesses are recorded in its order, with their sizes and values") {
  const std::string expected =
      "write 8 4 0x7\n"
      "write 12 2 0xfffe\n"
      "read 8 4 0x7\n"
      "write 14 1 0x7\n"
      // An addition is a read and a write, a compare-exchange that fails is a read.
      "read 16 8 0x0\n"
      "write 16 8 0x5\n"
      "read 16 8 0x5\n"
      // A structure copy is announced write first, and recorded read first; pieces do not cross multiples
      // of 8.
      "read 32 8 0x0\n"
      "read 40 4 0x0\n"
      "write 44 4 0x0\n"
      "write 48 8 0x0\n"
      // memset, memcpy, memmove
      "write 56 8 0x7878787878787878\n"
      "write 64 8 0x7878787878787878\n"
      "write 72 4 0x78787878\n"
      "read 56 8 0x7878787878787878\n"
      "read 64 8 0x7878787878787878\n"
      "read 72 4 0x78787878\n"
      "write 76 4 0x78787878\n"
      "write 80 8 0x7878787878787878\n"
      "write 88 8 0x7878787878787878\n"
      "read 112 8 0x0\n"
      "read 120 8 0x0\n"
      "write 120 8 0x0\n"
      "write 128 8 0x0\n"
      // An atomic store of 128 bits.
      "write 96 8 0x4\n"
      "write 104 8 0x3\n"
      // A write and a read of the same size that are no copy.
      "write 8 4 0x8\n"
      "read 44 4 0x0\n";
  for (const std::string& build : builds()) {
    INFO(build);
    CHECK(accesses_to_box(recording_of({program_in(build, "sequence_c")}).accesses) == expected);
  }
}

TEST_CASE("a program whose memory only its own code touches is recorded without added writes") {
  for (const std::string& build : builds()) {
    for (const std::uint32_t hand_over : {1u, 10u, 1000u}) {
      RecordOptions options;
      options.hand_over = hand_over;
      const Recorded recorded = recording_of({program_in(build, "closed_c")}, options);
      INFO(build << ", hand-over " << hand_over);
      CHECK(recorded.result.exit_status == 0);
      CHECK(recorded.result.added_writes == 0);
      CHECK(wrong_reads(recorded.accesses) == 0);
      CHECK(recorded.result.threads == 4);
    }
  }
}

TEST_CASE("the values recorded are those that the program saw, races included") {
  for (const std::string& build : builds()) {
    for (const std::uint32_t hand_over : {1u, 4u, 100u}) {
      RecordOptions options;
      options.hand_over = hand_over;
      const Recorded recorded = recording_of({program_in(build, "racy_c")}, options);
      INFO(build << ", hand-over " << hand_over);
      const auto self = landmark(recorded.accesses);
      std::vector<std::uint64_t> seen(4);
      std::size_t writes = 0;
      std::uint64_t last = 0;
      for (auto at = self; at != recorded.accesses.end(); ++at) {
        if (at->address != self->address + 8) continue;
        if (at->op == AccessOp::read) {
          seen[at->initiator] = at->value;
        } else {
          ++writes;
          last = at->value;
          REQUIRE(at->value == seen[at->initiator] + 1);
        }
      }
      CHECK(writes == 4 * 500);
      CHECK(recorded.result.hand_overs > recorded.accesses.size() / hand_over / 2);
      CHECK(recorded.result.hand_overs < 2 * recorded.accesses.size() / hand_over + 20);
      CHECK(last < writes);  // some were lost: threads did hand over between a read and its write
    }
  }
}

TEST_CASE("initiators are threads in the order of their creation, and all take part") {
  const Recorded recorded = recording_of({program_in("native-O2", "closed_c")});
  std::vector<std::size_t> of_thread(4);
  for (const Access& access : recorded.accesses) {
    REQUIRE(access.initiator < 4);
    ++of_thread[access.initiator];
  }
  for (const std::size_t count : of_thread) CHECK(count > recorded.accesses.size() / 5);
}

}  // namespace
}  // namespace earshot
