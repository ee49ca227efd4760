// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What holds for every table that the library brings along.
#include <catch2/catch.hpp>
#include <fstream>
#include <iterator>
#include <string>

#include "earshot/protocol/table.h"

namespace earshot {

TEST_CASE("the built-in tables are listed in a fixed order", "[protocol]") {
  CHECK(builtin_tables() == std::vector<std::string>{"write-through-update", "dirty-owner-update", "dragon",
                                                     "firefly", "competitive-update", "msi", "mesi", "moesi",
                                                     "berkeley", "write-once"});
}

TEST_CASE("a built-in table is its file, byte for byte, and bears the file's name", "[protocol]") {
  for (const std::string& name : builtin_tables()) {
    const std::string path = std::string(EARSHOT_SOURCE) + "/models/protocol/tables/" + name + ".table";
    std::ifstream file(path, std::ios::binary);
    REQUIRE(file);
    CHECK(std::string(std::istreambuf_iterator<char>(file), {}) == builtin_table_text(name));
    CHECK(load_table(name).name() == name);
    CHECK(load_table(path).dump() == load_table(name).dump());
  }
}

TEST_CASE("a built-in table names its source and its differences from it", "[protocol]") {
  for (const std::string& name : builtin_tables()) {
    INFO(name);
    CHECK(builtin_table_text(name).find("\n# Source: ") != std::string::npos);
    CHECK(builtin_table_text(name).find("\n# Differences: ") != std::string::npos);
  }
}

TEST_CASE("the first five tables update and the others invalidate; one counts", "[protocol]") {
  const std::vector<std::string>& names = builtin_tables();
  for (std::size_t i = 0; i < names.size(); ++i) {
    INFO(names[i]);
    CHECK(load_table(names[i]).family() == (i < 5 ? Family::update : Family::invalidate));
    CHECK(load_table(names[i]).counts() == (names[i] == "competitive-update"));
  }
  CHECK(load_table("competitive-update").limit() == 4);
}

TEST_CASE("a read hit needs no table walk in any table, except to forget counted updates", "[protocol]") {
  for (const std::string& name : builtin_tables()) {
    const Table table = load_table(name);
    for (const State& state : table.states()) {
      INFO(name << " " << state.name);
      const std::size_t slash = state.name.find('/');
      const bool counted = slash != std::string::npos && state.name.substr(slash) != "/0";
      CHECK(state.fast_read == (state.readable && !counted));
    }
  }
}

}  // namespace earshot
