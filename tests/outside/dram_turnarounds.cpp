// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What turning the data bus around costs. Row hits only, n reads, n writes, n reads and so on: a group of
// each loses P = 1 + tWPRE + tWTR + CL clocks of the data bus, whatever CWL is (own arithmetic from the
// spacing formulas of AS4C256M16D4 Rev 1.0, Table 43), so the bus is used 8n / (8n + P) of the time.
#include <catch2/catch.hpp>

#include "outside/dram_drive.h"

namespace earshot {
namespace {

constexpr unsigned rounds = 12;

// Bursts go through the groups by turns. `same_group`: each read after a write goes to the group just
// written.
double use_of_data_bus(const Grade& grade, unsigned n, bool same_group) {
  DramConfig config = quiet(grade);
  config.scheduling = DramScheduling::first_come;
  DrivenChannel driven(config);
  for (unsigned group = 0; group < grade.bank_groups; ++group) driven.put({false, place(grade, group, 1)}, 0);
  driven.finish();
  std::vector<DramRequest> requests;
  unsigned group = 0;
  for (unsigned round = 0; round < rounds; ++round) {
    for (unsigned i = 0; i < 2 * n; ++i) {
      const auto column = static_cast<std::uint64_t>(requests.size() % config.columns());
      requests.push_back({i >= n, place(grade, group % grade.bank_groups, 1, column)});
      if (!(same_group && i == 2 * n - 1)) ++group;
    }
  }
  driven.stream(requests);

  std::vector<Clocks> columns;
  for (const CommandRecord& command : driven.legal_log()) {
    if (command.command == DramCommand::read || command.command == DramCommand::write)
      columns.push_back(command.clock);
  }
  columns.erase(columns.begin(), columns.begin() + grade.bank_groups);
  REQUIRE(columns.size() == requests.size());
  // From the first read of one round to that of another.
  const Clocks clocks = columns[2 * n * (rounds - 1)] - columns[2 * n];
  return 2.0 * n * (rounds - 2) * grade.burst_clocks() / static_cast<double>(clocks);
}

}  // namespace

TEST_CASE("Turning the data bus around loses 1 + tWPRE + tWTR + CL clocks", "[outside][dram]") {
  const unsigned group_sizes[] = {1, 4, 8, 16, 32};
  const struct {
    const char* name;
    bool same_group;
    unsigned lost;
    double use[5];
  } table[] = {
      {"ddr3-1600k", true, 19, {0.2963, 0.6275, 0.7711, 0.8707, 0.9309}},
      {"ddr4-2400t", false, 22, {0.2667, 0.5926, 0.7442, 0.8533, 0.9209}},
      {"ddr4-3200aa", false, 28, {0.2222, 0.5333, 0.6957, 0.8205, 0.9014}},
      {"ddr4-3200aa", true, 36, {0.1818, 0.4706, 0.6400, 0.7805, 0.8767}},
  };
  for (const auto& want : table) {
    const Grade grade = load_grade(want.name);
    CHECK(2 + (want.same_group ? grade.twtr_l : grade.twtr_s) + grade.cl == want.lost);
    for (std::size_t i = 0; i < std::size(group_sizes); ++i) {
      const unsigned n = group_sizes[i];
      INFO(want.name << (want.same_group ? ", same group, " : ", other group, ") << n);
      const double measured = use_of_data_bus(grade, n, want.same_group);
      CHECK(measured == Approx(want.use[i]).epsilon(3e-4));
      CHECK(measured == Approx(8.0 * n / (8.0 * n + want.lost)).epsilon(1e-9));
    }
  }
}

}  // namespace earshot
