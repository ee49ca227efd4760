// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// libsystemc owns main() and calls sc_main().
#define CATCH_CONFIG_RUNNER
#include <catch2/catch.hpp>
#include <systemc>

int sc_main(int argc, char* argv[]) { return Catch::Session().run(argc, argv); }
