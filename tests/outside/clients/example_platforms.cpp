// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// TLM-2.0 platforms nobody here wrote (Debian's libsystemc-doc; Accellera's examples), as they are and with
// caches and a bus in them. What their traffic generators say of the data they read back must stay the same,
// and so must the data; the coherence monitor finds nothing, and no rule of the base protocol is broken by us
// on any hop.
#include <sys/wait.h>

#include <algorithm>
#include <array>
#include <catch2/catch.hpp>
#include <cstdio>
#include <fstream>
#include <sstream>
#include <string>
#include <vector>

namespace {

struct Outcome {
  int status = -1;
  std::vector<std::string> lines;
};

Outcome run(const std::string& command) {
  // The platforms never free their payloads.
  std::FILE* const pipe = popen(("ASAN_OPTIONS=detect_leaks=0 " + command + " 2>&1").c_str(), "r");
  REQUIRE(pipe != nullptr);
  std::string out;
  std::array<char, 4096> buffer;
  for (std::size_t n; (n = fread(buffer.data(), 1, buffer.size(), pipe)) > 0;) out.append(buffer.data(), n);
  const int status = pclose(pipe);
  Outcome outcome;
  outcome.status = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
  std::istringstream text(out);
  for (std::string line; std::getline(text, line);) outcome.lines.push_back(line);
  return outcome;
}

std::vector<std::string> only(const std::vector<std::string>& lines, const std::string& part) {
  std::vector<std::string> found;
  for (const std::string& line : lines)
    if (line.find(part) != std::string::npos) found.push_back(line);
  return found;
}

std::vector<std::string> begun(const std::vector<std::string>& lines, const std::string& begin) {
  std::vector<std::string> found;
  for (const std::string& line : lines)
    if (line.compare(0, begin.size(), begin) == 0) found.push_back(line);
  return found;
}

std::vector<std::string> not_empty(std::vector<std::string> lines) {
  lines.erase(std::remove(lines.begin(), lines.end(), std::string()), lines.end());
  return lines;
}

std::vector<std::string> sorted(std::vector<std::string> lines) {
  std::sort(lines.begin(), lines.end());
  return lines;
}

struct Example {
  const char* name;
  bool non_blocking;  // its initiators use nb_transport
};

// lt_mixed_endian reads what to do from a file of theirs, and its authors compare the lines with "::" only.
bool reads_input(const Example& example) {
  return std::string(example.name) == "lt_mixed_endian";
}
std::string input(const Example& example) {
  return reads_input(example) ? " < " EARSHOT_CLIENT_SOURCES "/lt_mixed_endian/results/input.txt"
                              : " < /dev/null";
}

Outcome inserted(const Example& example, const std::string& choice) {
  return run(std::string(EARSHOT_CLIENTS "/client_") + example.name + "_inserted " + choice + input(example));
}

void the_original_does_what_its_authors_say(const Example& example) {
  const Outcome outcome =
      run(std::string(EARSHOT_CLIENTS "/client_") + example.name + "_original" + input(example));
  std::ifstream file(std::string(EARSHOT_CLIENT_SOURCES "/") + example.name + "/results/expected.log");
  std::vector<std::string> expected;
  for (std::string line; std::getline(file, line);) expected.push_back(line);
  CHECK(outcome.status == 0);
  REQUIRE(!expected.empty());
  if (reads_input(example))
    CHECK(only(outcome.lines, "::") == only(expected, "::"));
  else
    CHECK(not_empty(outcome.lines) == not_empty(expected));
}

void nothing_changes_with_caches(const Example& example) {
  const Outcome original = inserted(example, "original");
  REQUIRE(original.status == 0);
  REQUIRE(begun(original.lines, "@verdict").size() >= 2);
  REQUIRE(!begun(original.lines, "@read").empty());

  const std::string protocol = GENERATE("dirty-owner-update", "dragon", "mesi", "write-through-update");
  const std::string timing = GENERATE("annotated", "arbitrated");
  const std::string place = GENERATE("instead", "before", "uncached");
  const std::string choice = place + " " + protocol + " " + timing;
  // Annotated, nb_transport is answered early, by way of the target's b_transport. Their interconnect for
  // nb_transport waits in that, and a call of nb_transport may not.
  if (example.non_blocking && timing == "annotated" && place == "before") return;
  const Outcome outcome = inserted(example, choice);
  INFO(example.name << " " << choice);
  CHECK(begun(outcome.lines, "@failed").empty());
  CHECK(outcome.status == 0);
  CHECK(sorted(begun(outcome.lines, "@verdict")) == sorted(begun(original.lines, "@verdict")));
  CHECK(begun(outcome.lines, "@read") == begun(original.lines, "@read"));
  CHECK(only(outcome.lines, "::") == only(original.lines, "::"));
  CHECK(begun(outcome.lines, "@law").empty());
  CHECK(begun(outcome.lines, "@unfinished").empty());
  CHECK(begun(outcome.lines, "@monitored").size() == 1);
  CHECK(begun(outcome.lines, "@monitored 0").empty() == (place != "uncached"));

  // Direct memory: refused by caches, granted where there are none, for the same accesses or not.
  const bool direct = begun(original.lines, "@direct 0").empty();
  CHECK(direct == (std::string(example.name) == "lt_dmi"));
  CHECK(begun(outcome.lines, "@direct 0").empty() == (direct && place == "uncached"));

  // By us: as the target of an initiator, as the initiator of a target or of their interconnect.
  std::vector<std::string> ours = begun(outcome.lines, "@target initiator");
  for (const char* const hop : {"@initiator target", "@initiator their-bus"}) {
    if (place == "before" && std::string(hop) == "@initiator target") continue;  // that is theirs
    const auto broken = begun(outcome.lines, hop);
    ours.insert(ours.end(), broken.begin(), broken.end());
  }
  // What a target of theirs does in an uncached window is passed on as it is.
  if (place == "uncached")
    ours.erase(std::remove_if(ours.begin(), ours.end(),
                              [&](const std::string& line) {
                                return std::find(original.lines.begin(), original.lines.end(), line) !=
                                       original.lines.end();
                              }),
               ours.end());
  // The price of answering nb_transport at once: see CoherentCache.
  if (example.non_blocking && timing == "annotated")
    ours.erase(std::remove_if(
                   ours.begin(), ours.end(),
                   [](const std::string& line) { return line.find(" non-blocking-blocks: ") != line.npos; }),
               ours.end());
  CHECK(ours == std::vector<std::string>{});
  // By them: nothing that they do not do among themselves.
  if (begun(original.lines, "@initiator initiator").empty())
    CHECK(begun(outcome.lines, "@initiator initiator") == std::vector<std::string>{});
}

}  // namespace

#define CLIENT(name, non_blocking)                                                        \
  TEST_CASE(#name " does what its authors logged") {                                      \
    the_original_does_what_its_authors_say({#name, non_blocking});                        \
  }                                                                                       \
  TEST_CASE(#name " reads the same data and gives the same verdicts with caches in it") { \
    nothing_changes_with_caches({#name, non_blocking});                                   \
  }

CLIENT(lt, false)
CLIENT(lt_dmi, false)
CLIENT(lt_temporal_decouple, false)
CLIENT(lt_mixed_endian, false)
CLIENT(at_1_phase, true)
CLIENT(at_2_phase, true)
CLIENT(at_4_phase, true)
CLIENT(at_mixed_targets, true)
CLIENT(at_ooo, true)

TEST_CASE("caches and a bus take at most 12 lines of a platform's top") {
  std::ifstream file(EARSHOT_TEST_DATA "/outside/clients/insert.cpp");
  int lines = 0;
  bool counting = false;
  for (std::string line; std::getline(file, line);) {
    if (line.find("// insertion ") != std::string::npos) {
      counting = line.find("begins") != std::string::npos || line.find("goes on") != std::string::npos;
    } else if (counting && line.find_first_not_of(" }") != std::string::npos) {
      ++lines;
    }
  }
  CHECK(lines > 8);
  CHECK(lines <= 12);
}
