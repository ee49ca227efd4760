// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The prover against the model checker Spin: the same verdict and, for sound tables, the same number of
// states.
#include <catch2/catch.hpp>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <future>
#include <iterator>
#include <regex>
#include <string>

#include "earshot/protocol/prover.h"
#include "outside/promela.h"

namespace earshot {
namespace {

// A folder that goes with the object.
class ScratchFolder {
 public:
  ScratchFolder() {
    std::string name = (std::filesystem::temp_directory_path() / "earshot-spin-XXXXXX").string();
    if (mkdtemp(name.data()) == nullptr) throw std::runtime_error("cannot make " + name);
    path_ = name;
  }
  ~ScratchFolder() {
    std::error_code ignored;
    std::filesystem::remove_all(path_, ignored);
  }
  ScratchFolder(const ScratchFolder&) = delete;
  ScratchFolder& operator=(const ScratchFolder&) = delete;
  const std::filesystem::path& path() const { return path_; }

 private:
  std::filesystem::path path_;
};

struct SpinResult {
  std::string output;
  bool finished = false;  // the whole search was run or stopped at an error
  std::uint64_t stored = 0;
  std::uint64_t errors = 0;
};

SpinResult run_spin(const Table& table, int caches) {
  const ScratchFolder folder;
  std::ofstream(folder.path() / "line.pml") << promela(table, caches);
  const std::string command =
      "cd '" + folder.path().string() +
      "' && { spin -a line.pml && cc -w -DSAFETY -DNOREDUCE -o pan pan.c && ./pan -m100000; } "
      ">out.txt 2>&1";
  const int status = std::system(command.c_str());
  SpinResult result;
  std::ifstream output(folder.path() / "out.txt");
  result.output.assign(std::istreambuf_iterator<char>(output), {});
  std::smatch stored, errors;
  result.finished = status == 0 &&
                    std::regex_search(result.output, stored, std::regex("(\\d+) states, stored")) &&
                    std::regex_search(result.output, errors, std::regex("errors: (\\d+)")) &&
                    result.output.find("max search depth too small") == std::string::npos;
  if (result.finished) {
    result.stored = std::stoull(stored[1]);
    result.errors = std::stoull(errors[1]);
  }
  return result;
}

bool spin_is_installed() {
  if (std::system("command -v spin >/dev/null 2>&1") == 0) return true;
  WARN("spin is not installed, so the prover was not compared with it; on Debian: apt-get install spin");
  return false;
}

// The snoop row of one state, changed.
Table with_snoop(const std::string& name, StateId state, Event event, void (*change)(Row&)) {
  const Table table = load_table(name);
  Row row = table.row(state, event, false);
  change(row);
  return table.with_row(state, event, false, row);
}

void check_agreement(const Proof& proof, const SpinResult& spin) {
  INFO(proof.caches << " caches:\n" << spin.output);
  REQUIRE(spin.finished);
  CHECK(proof.sound);
  CHECK(spin.errors == 0);
  CHECK(spin.stored == proof.unfolded_states);
}

}  // namespace

TEST_CASE("Spin finds every built-in table sound and reaches as many states as the prover",
          "[outside][spin]") {
  if (!spin_is_installed()) return;
  for (const std::string& name : builtin_tables()) {
    INFO(name);
    const Table table = load_table(name);
    // Most of the time goes into compiling what Spin generates, so two models are compiled side by side.
    std::future<SpinResult> with_two = std::async(std::launch::async, [&] { return run_spin(table, 2); });
    const SpinResult with_three = run_spin(table, 3);
    check_agreement(prove(table, 2), with_two.get());
    check_agreement(prove(table, 3), with_three);
  }
}

TEST_CASE("Spin finds a broken rule where the prover finds one", "[outside][spin]") {
  if (!spin_is_installed()) return;
  const struct {
    const char* rule;
    Table table;
  } broken[] = {
      {"two owners",
       with_snoop("dirty-owner-update", 2, Event::snoop_update, [](Row& row) { row.next = 2; })},
      {"may write without the bus", with_snoop("msi", 2, Event::snoop_read, [](Row& row) { row.next = 2; })},
      {"can read a stale value",
       with_snoop("dragon", 2, Event::snoop_update, [](Row& row) { row.take = false; })},
      {"memory is stale",
       with_snoop("firefly", 3, Event::snoop_read, [](Row& row) { row.write_memory = false; })},
      {"no row says", with_snoop("mesi", 2, Event::snoop_upgrade, [](Row& row) { row.defined = false; })},
  };
  for (const auto& [rule, table] : broken) {
    const Proof proof = prove(table, 2);
    const SpinResult spin = run_spin(table, 2);
    INFO(describe(table, proof) << spin.output);
    REQUIRE(spin.finished);
    CHECK(proof.violation.find(rule) != std::string::npos);
    CHECK(spin.errors == 1);
    CHECK(spin.output.find("assertion violated") != std::string::npos);
  }
}

}  // namespace earshot
