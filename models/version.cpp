// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/version.h"

#include <string>
#include <systemc>

#include "earshot/version_check.h"

namespace earshot {
namespace {

std::string text_of(int number) {
  return std::to_string(number / 10000) + "." + std::to_string(number / 100 % 100) + "." + std::to_string(number % 100);
}

}  // namespace

const char* version() { return EARSHOT_VERSION; }

void require_same_version(HeadersVersion headers, const char* module) {
  if (headers.number / 100 == EARSHOT_VERSION_NUMBER / 100) return;
  SC_REPORT_ERROR("/earshot/version",
                  (std::string(module) + ": compiled with the headers of Earshot " + text_of(headers.number) +
                   ", but the library linked is " EARSHOT_VERSION
                   ". Let the compiler and the linker (or LD_LIBRARY_PATH) find the same installation, and compile "
                   "everything that includes Earshot's headers anew")
                      .c_str());
}

}  // namespace earshot
