// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The earshot command: earshot VERB ... Exit status 0: fine, 1: a finding, 2: unusable input.
#include <cstdio>
#include <cstdlib>
#include <exception>
#include <string>
#include <systemc>
#include <vector>

#include "earshot/protocol/nearest.h"
#include "earshot/version.h"
#include "simulate.h"
#include "verbs.h"

namespace earshot {
namespace {

struct Verb {
  const char* name;
  const char* usage;
  int (*run)(const std::vector<std::string>& words);
};

constexpr Verb verbs[] = {
    {"simulate", "CONFIG [--section.key=value ...] [--json FILE] [--quiet]", simulate_verb},
    {"prove", "NAME|FILE [--caches N]", prove_verb},
    {"record", "--into FILE [...] -- PROGRAM ARGS", record_verb},
    {"convert", "FROM TO", convert_verb},
};

void print_help() {
  std::puts("earshot VERB ...: what coherent caches, a snooping bus and memory cost a program\n");
  for (const Verb& verb : verbs) std::printf("  earshot %-9s %s\n", verb.name, verb.usage);
  std::puts("\n'earshot VERB --help' says more; 'earshot --version' the version.\n"
            "Exit status: 0 fine, 1 a finding, 2 unusable input.");
}

int run(const std::vector<std::string>& words) {
  if (words.empty() || words[0] == "--help" || words[0] == "-h") {
    print_help();
    return words.empty() ? 2 : 0;
  }
  if (words[0] == "--version") {
    std::printf("earshot %s\n", version());
    return 0;
  }
  std::vector<std::string> names;
  for (const Verb& verb : verbs) {
    if (words[0] == verb.name) return verb.run({words.begin() + 1, words.end()});
    names.push_back(verb.name);
  }
  const std::string close = nearest(words[0], names);
  throw UsageError("'" + words[0] + "' is no verb; " +
                   (close.empty() ? "'earshot --help' lists them" : "did you mean '" + close + "'?"));
}

}  // namespace
}  // namespace earshot

int sc_main(int argc, char* argv[]) {
  try {
    const int status = earshot::run({argv + 1, argv + argc});
    if (std::fflush(stdout) != 0) throw earshot::UsageError("standard output cannot be written");
    return status;
  } catch (const earshot::Finding& finding) {
    std::fprintf(stderr, "earshot: %s\n", finding.what());
    return 1;
  } catch (const sc_core::sc_report& report) {
    std::fprintf(stderr, "earshot: %s\n", report.get_msg());
    return 2;
  } catch (const std::exception& error) {
    std::fprintf(stderr, "earshot: %s\n", error.what());
    return 2;
  }
}

// libsystemc's main() would print a banner before sc_main().
int main(int argc, char* argv[]) {
  setenv("SYSTEMC_DISABLE_COPYRIGHT_MESSAGE", "1", 1);
  return sc_core::sc_elab_and_sim(argc, argv);
}
