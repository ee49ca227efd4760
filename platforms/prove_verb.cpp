// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <cstdio>

#include "earshot/protocol/prover.h"
#include "quantities.h"
#include "settings.h"
#include "verbs.h"

namespace earshot {
namespace {

constexpr const char* help =
    "earshot prove NAME|FILE [--caches N]\n"
    "\n"
    "Visits every reachable state of N caches (1 to 8, default 3) and one line under a\n"
    "protocol table and says whether the protocol is sound; if not, the shortest way to\n"
    "break it. Exit status 1 if it is not. Built-in tables:\n\n";

}  // namespace

int prove_verb(const std::vector<std::string>& words) {
  std::string name, caches_text = "3";
  for (std::size_t i = 0; i < words.size(); ++i) {
    if (words[i] == "--help") {
      std::fputs(help, stdout);
      for (const std::string& table : builtin_tables()) std::printf("  %s\n", table.c_str());
      return 0;
    }
    if (words[i].rfind("--caches=", 0) == 0)
      caches_text = words[i].substr(9);
    else if (words[i] == "--caches" && i + 1 < words.size())
      caches_text = words[++i];
    else if (words[i].rfind("--", 0) == 0 || !name.empty())
      throw UsageError("prove: '" + words[i] + "' is not understood; expected NAME|FILE [--caches N]");
    else
      name = words[i];
  }
  std::uint64_t caches = 0;
  if (name.empty()) throw UsageError("prove: no table; expected a built-in name (see --help) or the path of a file");
  if (!parse_number(caches_text, caches) || caches < 1 || caches > 8)
    throw UsageError("prove: --caches '" + caches_text + "'; expected a whole number from 1 to 8");

  const Table table = load_table(name);
  const Proof proof = prove(table, static_cast<int>(caches));
  std::fputs(describe(table, proof).c_str(), stdout);
  return proof.sound ? 0 : 1;
}

}  // namespace earshot
