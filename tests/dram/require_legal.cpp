// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <algorithm>
#include <catch2/catch.hpp>

#include "command_checker.h"

namespace earshot {

void require_legal(const std::vector<CommandRecord>& log, const Grade& grade, const LogRules& rules) {
  std::string text;
  const std::vector<Broken> broken = broken_rules(log, grade, rules);
  for (std::size_t i = 0; i < std::min<std::size_t>(broken.size(), 10); ++i) text += broken[i].text + "\n";
  INFO(broken.size() << " times a rule is broken in a log of " << log.size() << " commands:\n" << text);
  REQUIRE(broken.empty());
}

void require_legal(const std::vector<CommandRecord>& log, const DramConfig& config, Clocks end) {
  require_legal(log, config.grade, {config.ranks, config.refresh, end});
}

}  // namespace earshot
