// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/dram/dram_config.h"

#include "earshot/dram/dram_address_map.h"

namespace earshot {

namespace {

// What must be sound before columns() and bytes() mean anything.
bool geometry_problems(const DramConfig& config, std::vector<std::string>& problems) {
  const std::size_t before = problems.size();
  const Grade& grade = config.grade;
  const auto within = [&](const char* what, std::uint64_t value, std::uint64_t least, std::uint64_t most) {
    if (value < least || value > most)
      problems.push_back(std::string(what) + ": " + std::to_string(value) + "; expected " +
                         std::to_string(least) + " to " + std::to_string(most));
  };
  within("channels", config.channels, 1, 64);
  within("ranks", config.ranks, 1, 16);
  within("bank groups", grade.bank_groups, 1, 64);
  within("banks of a group", grade.banks_per_group, 1, 64);
  within("rows", grade.rows, 1, std::uint64_t{1} << 32);
  within("device width", grade.device_bits, 1, 1024);
  within("burst length", grade.burst_length, 2, 64);
  within("channel width", config.width(), 8, 1024);
  within("page bytes", grade.page_bytes, 1, 1u << 20);
  if (problems.size() != before) return false;

  if (config.width() % grade.device_bits != 0)
    problems.push_back("channel width: " + std::to_string(config.width()) +
                       " bits are no multiple of a device's " + std::to_string(grade.device_bits));
  if (config.width() % 8 != 0 || (config.burst_bytes() & (config.burst_bytes() - 1)) != 0)
    problems.push_back("channel width: a burst of " + std::to_string(config.width() * grade.burst_length) +
                       " bits; expected a power of two of bytes");
  const std::uint64_t burst_bits = std::uint64_t{grade.device_bits} * grade.burst_length;
  if (std::uint64_t{grade.page_bytes} * 8 % burst_bits != 0)
    problems.push_back("page: " + std::to_string(grade.page_bytes) +
                       " bytes are no whole number of bursts of " + std::to_string(burst_bits) + " bits");
  if (grade.burst_length % 2 != 0)
    problems.push_back("burst length: " + std::to_string(grade.burst_length) +
                       "; expected an even number of beats");
  return problems.size() == before;
}

void policy_problems(const DramConfig& config, std::vector<std::string>& problems) {
  const auto complain = [&](const std::string& what) { problems.push_back(what); };
  constexpr unsigned longest_queue = 4096;
  if (config.read_queue < 1 || config.read_queue > longest_queue)
    complain("read queue: " + std::to_string(config.read_queue) + " bursts; expected 1 to 4096");
  if (config.write_queue < 1 || config.write_queue > longest_queue)
    complain("write queue: " + std::to_string(config.write_queue) + " bursts; expected 1 to 4096");
  if (config.write_high > config.write_queue)
    complain("write marks: the high mark " + std::to_string(config.write_high) +
             " is above the queue's length " + std::to_string(config.write_queue));
  if (config.write_low >= config.write_high)
    complain("write marks: the low mark " + std::to_string(config.write_low) +
             " is not below the high mark " + std::to_string(config.write_high));
  if (config.age_cap < 1) complain("age cap: 0 clocks; expected at least 1");
  constexpr Clocks longest = Clocks{1} << 32;
  if (config.frontend > longest || config.backend > longest || config.idle_timeout > longest)
    complain("controller latency, idle timeout: expected at most 2^32 clocks");

  const Grade& grade = config.grade;
  if (config.refresh == DramRefresh::all_bank && (grade.trefi == 0 || grade.trfc == 0))
    complain("refresh: the grade has no tREFI or tRFC; expected both, or refresh off");
  if (config.refresh == DramRefresh::per_bank && (grade.trefi_bank == 0 || grade.trfc_bank == 0))
    complain("refresh: per-bank refresh, which " + (grade.standard.empty() ? "this grade" : grade.standard) +
             " does not have");
}

}  // namespace

std::vector<std::string> DramConfig::problems() const {
  std::vector<std::string> problems = grade.problems();
  policy_problems(*this, problems);
  if (geometry_problems(*this, problems)) {
    const std::vector<std::string> more = DramAddressMap::problems(*this);
    problems.insert(problems.end(), more.begin(), more.end());
  }
  return problems;
}

}  // namespace earshot
