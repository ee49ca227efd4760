// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The worked example of models/protocol/README.md is run as it stands there.
#include <catch2/catch.hpp>
#include <fstream>
#include <string>
#include <vector>

#include "earshot/protocol/prover.h"

namespace earshot {
namespace {

// The indented blocks of a Markdown text, without their indentation. Blank lines do not end a block.
std::vector<std::string> indented_blocks(const std::string& path) {
  std::ifstream file(path);
  REQUIRE(file);
  std::vector<std::string> blocks;
  bool inside = false;
  for (std::string line; std::getline(file, line);) {
    if (line.compare(0, 4, "    ") == 0) {
      if (!inside) blocks.emplace_back();
      blocks.back() += line.substr(4) + "\n";
      inside = true;
    } else if (!line.empty()) {
      inside = false;
    }
  }
  return blocks;
}

}  // namespace

TEST_CASE("the manual's example table fails and is mended as the manual says", "[protocol]") {
  const std::vector<std::string> blocks =
      indented_blocks(std::string(EARSHOT_SOURCE) + "/models/protocol/README.md");
  REQUIRE(blocks.size() >= 2);
  const Table broken = Table::parse(blocks[0], "README.md");
  CHECK(describe(broken, prove(broken, 2)) == blocks[1]);

  std::string mended = blocks[0];
  const std::string row = "| supply               | Clean";
  REQUIRE(mended.find(row) != std::string::npos);
  mended.replace(mended.find(row), row.size(), "| supply, write-memory | Clean");
  const Table table = Table::parse(mended, "README.md");
  CHECK(prove(table, 2).sound);
  CHECK(prove(table, 3).sound);
}

}  // namespace earshot
