// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// libsystemc owns main() and calls sc_main().
#define CATCH_CONFIG_RUNNER
#include <catch2/catch.hpp>
#include <cstdio>
#include <systemc>

int sc_main(int argc, char* argv[]) {
  // Catch 2.13 reports a failure under the case's name, indented to its first ": ". Past the 80th column it never ends.
  for (const Catch::TestCase& test : Catch::getRegistryHub().getTestCaseRegistry().getAllTests()) {
    const std::size_t colon = test.name.find(": ");
    if (colon == std::string::npos || colon < 74) continue;
    std::fprintf(stderr, "the name of a test case has its first \": \" too far to the right: %s\n", test.name.c_str());
    return 2;
  }
  return Catch::Session().run(argc, argv);
}
