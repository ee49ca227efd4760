// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <catch2/catch.hpp>
#include <map>
#include <set>

#include "earshot/traffic/pattern.h"
#include "earshot/traffic/seeded_random.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

std::vector<Access> accesses_of(const PatternConfig& config, std::uint32_t only = every_initiator) {
  const auto pattern = make_pattern(config, only);
  std::vector<Access> accesses;
  for (Access access; pattern->next(access);) accesses.push_back(access);
  return accesses;
}

PatternConfig config_of(const std::string& kind) {
  PatternConfig config;
  config.kind = kind;
  config.accesses = 4000;
  config.lines = 16;
  config.base = 0x4000;
  return config;
}

std::string error_of(const PatternConfig& config) {
  try {
    make_pattern(config);
  } catch (const PatternError& error) {
    return error.what();
  }
  return "no error";
}

double share_of_writes(const std::vector<Access>& accesses) {
  const auto writes = std::count_if(accesses.begin(), accesses.end(),
                                    [](const Access& access) { return access.op == AccessOp::write; });
  return static_cast<double>(writes) / static_cast<double>(accesses.size());
}

TEST_CASE("SplitMix64 gives the numbers of the published algorithm", "[traffic]") {
  // Rosetta Code, "Pseudo-random numbers/Splitmix64": the first five numbers for the seed 1234567.
  SplitMix64 random(1234567);
  CHECK(random.next() == 6457827717110365317u);
  CHECK(random.next() == 3203168211198807973u);
  CHECK(random.next() == 9817491932198370423u);
  CHECK(random.next() == 4593380528125082431u);
  CHECK(random.next() == 16408922859458223821u);
}

TEST_CASE("in every pattern initiators take turns, stay within the footprint, and write distinct values",
          "[traffic]") {
  for (const std::string& kind : pattern_kinds()) {
    INFO(kind);
    const PatternConfig config = config_of(kind);
    const std::vector<Access> accesses = accesses_of(config);
    REQUIRE(accesses.size() == config.accesses * config.initiators);
    const std::uint64_t lines = kind == "private" ? 4 * config.lines : config.lines;
    std::set<std::uint64_t> values;
    std::size_t turn = 0, writes = 0;
    for (const Access& access : accesses) {
      REQUIRE(access.initiator == turn++ % config.initiators);
      REQUIRE(access.size == config.word_bytes);
      REQUIRE(access.address % config.word_bytes == 0);
      REQUIRE(access.address >= config.base);
      REQUIRE(access.address < config.base + lines * config.line_bytes);
      REQUIRE(access.has_value == (access.op == AccessOp::write));
      if (access.has_value) values.insert(access.value), ++writes;
    }
    CHECK(writes > 0);
    CHECK(values.size() == writes);
  }
}

TEST_CASE("`only` yields exactly one initiator's accesses of a pattern", "[traffic]") {
  for (const std::string& kind : pattern_kinds()) {
    INFO(kind);
    const PatternConfig config = config_of(kind);
    const std::vector<Access> accesses = accesses_of(config);
    for (std::uint32_t only = 0; only < config.initiators; ++only) {
      CHECK(accesses_of(config, only) == those_of(only, accesses));
    }
    CHECK(accesses_of(config, config.initiators).empty());
  }
}

TEST_CASE("a pattern depends on its seed alone", "[traffic]") {
  for (const std::string kind : {"private", "read-shared", "false-sharing", "uniform"}) {
    PatternConfig config = config_of(kind);
    const std::vector<Access> accesses = accesses_of(config);
    CHECK(accesses_of(config) == accesses);
    config.seed = 2;
    CHECK(accesses_of(config) != accesses);
  }
}

TEST_CASE("initiators of one pattern draw from different random sequences", "[traffic]") {
  PatternConfig config = config_of("uniform");
  config.initiators = 8;
  config.lines = 1u << 20;
  const auto addresses_of = [&config](std::uint32_t initiator) {
    std::vector<std::uint64_t> addresses;
    for (const Access& access : accesses_of(config, initiator)) addresses.push_back(access.address);
    return addresses;
  };
  // Not even a stretch of one may be a later stretch of another: a common slip with generators that step by a
  // constant.
  const std::vector<std::uint64_t> first = addresses_of(0);
  for (std::uint32_t other = 1; other < config.initiators; ++other) {
    const std::vector<std::uint64_t> stretch = addresses_of(other);
    CHECK(std::search(first.begin(), first.end(), stretch.begin(), stretch.begin() + 3) == first.end());
  }
}

TEST_CASE("write_percent is the share of writes where the kind says so", "[traffic]") {
  for (const std::uint32_t percent : {0u, 1u, 30u, 100u}) {
    for (const std::string kind : {"private", "false-sharing", "uniform"}) {
      PatternConfig config = config_of(kind);
      config.write_percent = percent;
      // 16000 draws: a standard deviation of at most 0.4 per cent.
      CHECK(share_of_writes(accesses_of(config)) == Approx(percent / 100.0).margin(0.02));
    }
  }
}

TEST_CASE("private: no line is touched by two initiators, and all of one's own are", "[traffic]") {
  const PatternConfig config = config_of("private");
  std::map<std::uint64_t, std::set<std::uint32_t>> users;
  for (const Access& access : accesses_of(config))
    users[access.address / config.line_bytes].insert(access.initiator);
  CHECK(users.size() == config.initiators * config.lines);
  for (const auto& [line, initiators] : users) CHECK(initiators.size() == 1);
}

TEST_CASE("read-shared: only initiator 0 writes, and all read all words", "[traffic]") {
  const PatternConfig config = config_of("read-shared");
  std::map<std::uint64_t, std::set<std::uint32_t>> readers;
  for (const Access& access : accesses_of(config)) {
    if (access.op == AccessOp::read) readers[access.address].insert(access.initiator);
    if (access.op == AccessOp::write) CHECK(access.initiator == 0);
  }
  CHECK(readers.size() == config.lines * config.line_bytes / config.word_bytes);
  for (const auto& [word, initiators] : readers) CHECK(initiators.size() == config.initiators);
  CHECK(share_of_writes(accesses_of(config, 0)) == Approx(0.3).margin(0.03));
}

TEST_CASE("producer-consumer: each value is written once, then read once by each consumer before the next",
          "[traffic]") {
  const PatternConfig config = config_of("producer-consumer");
  const std::uint64_t words = config.lines * config.line_bytes / config.word_bytes;
  std::uint64_t at = 0, round = 0;
  for (const Access& access : accesses_of(config)) {
    if (access.initiator == 0) {
      CHECK(access.op == AccessOp::write);
      CHECK(access.address == config.base + round++ % words * config.word_bytes);
      at = access.address;
    } else {
      CHECK(access.op == AccessOp::read);
      CHECK(access.address == at);
    }
  }
}

TEST_CASE("migratory: each object is read, then written, by one initiator after the other", "[traffic]") {
  for (const std::uint32_t lines : {4u, 5u, 16u}) {
    PatternConfig config = config_of("migratory");
    config.lines = lines;
    std::map<std::uint64_t, std::vector<Access>> of_object;
    for (const Access& access : accesses_of(config)) of_object[access.address].push_back(access);
    CHECK(of_object.size() == lines);
    for (const auto& [object, accesses] : of_object) {
      CHECK(object % config.line_bytes == 0);
      REQUIRE(accesses.size() % 2 == 0);
      for (std::size_t i = 0; i < accesses.size(); i += 2) {
        CHECK(accesses[i].op == AccessOp::read);
        CHECK(accesses[i + 1].op == AccessOp::write);
        CHECK(accesses[i].initiator == accesses[i + 1].initiator);
        if (i > 0) CHECK(accesses[i].initiator == (accesses[i - 1].initiator + 1) % config.initiators);
      }
    }
  }
}

TEST_CASE("false-sharing: every line is shared by all, no word by two", "[traffic]") {
  PatternConfig config = config_of("false-sharing");
  config.initiators = 16;
  std::map<std::uint64_t, std::set<std::uint32_t>> line_users, word_users;
  for (const Access& access : accesses_of(config)) {
    line_users[access.address / config.line_bytes].insert(access.initiator);
    word_users[access.address].insert(access.initiator);
  }
  CHECK(line_users.size() == config.lines);
  for (const auto& [line, initiators] : line_users) CHECK(initiators.size() == config.initiators);
  for (const auto& [word, initiators] : word_users) CHECK(initiators.size() == 1);
}

TEST_CASE("uniform: all words are read and written by all", "[traffic]") {
  PatternConfig config = config_of("uniform");
  config.accesses = 20'000;
  std::map<std::uint64_t, std::set<std::pair<std::uint32_t, AccessOp>>> uses;
  for (const Access& access : accesses_of(config)) uses[access.address].insert({access.initiator, access.op});
  CHECK(uses.size() == config.lines * config.line_bytes / config.word_bytes);
  for (const auto& [word, kinds] : uses) CHECK(kinds.size() == 2 * config.initiators);
}

TEST_CASE("all problems of a pattern's configuration are told at once", "[traffic]") {
  PatternConfig config;
  config.kind = "uniforn";
  config.initiators = 65;
  config.write_percent = 101;
  config.word_bytes = 3;
  config.line_bytes = 48;
  config.lines = 0;
  CHECK(error_of(config) ==
        "kind 'uniforn', expected one of private, read-shared, producer-consumer, migratory, false-sharing, "
        "uniform, did "
        "you mean 'uniform'?\n"
        "initiators 65, expected 1 to 64\n"
        "write_percent 101, expected 0 to 100\n"
        "word_bytes 3, expected 1, 2, 4 or 8\n"
        "line_bytes 48, expected a power of two from 8 to 256\n"
        "lines 0, expected 1 to 1048576");
}

TEST_CASE("problems that only some kinds have are told", "[traffic]") {
  PatternConfig config = config_of("producer-consumer");
  config.initiators = 1;
  CHECK(error_of(config) ==
        "initiators 1, expected at least 2 for producer-consumer: one writes, the others read");
  config = config_of("migratory");
  config.lines = 3;
  CHECK(error_of(config) == "lines 3, expected at least the number of initiators (4) for migratory");
  config = config_of("false-sharing");
  config.initiators = 17;
  CHECK(error_of(config) ==
        "line_bytes 64, expected at least initiators * word_bytes (68) for false-sharing: a word of each "
        "line for each "
        "initiator");
}

TEST_CASE("a pattern's lines are aligned and lie below 2^64", "[traffic]") {
  PatternConfig config = config_of("uniform");
  config.base = 32;
  CHECK(error_of(config) == "base 32, expected a multiple of line_bytes (64)");
  config.base = 0 - std::uint64_t{config.lines * config.line_bytes};
  CHECK(error_of(config) == "no error");
  config.kind = "private";
  CHECK(error_of(config) ==
        "base 18446744073709550592, expected at most 18446744073709547520 so that all lines lie below 2^64");
}

}  // namespace
}  // namespace earshot
