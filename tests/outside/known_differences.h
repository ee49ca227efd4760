// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Every place where our tables knowingly differ from a published sequence that tests/outside checks, in prose
// and as code. A test that meets one compares with `ours`, so that the rest of the sequence can be compared
// in full; and known_difference() refuses to be used where the two agree.
//
// Not listed, because they are not differences but another view of the same thing:
// - State names. Each test maps ours to the book's.
// - El-Rewini and Abd-El-Barr go on printing the value of an invalidated copy ("5 INV"). Here an invalid copy
//   has no value; it is compared with "no copy".
// - A write miss that books give as one event is in the updating tables a read followed by the broadcast,
// both
//   at one grant. Their two transactions are written out in the tests.
// - Names of transactions: BusRd is read, BusRdX read-exclusive, BusUpgr upgrade, BusUpd update (Dragon) or
//   write-through (Firefly), BusWr write-through.
#pragma once

#include <stdexcept>
#include <string>

namespace earshot::test {

struct KnownDifference {
  const char* what;       // the key
  const char* published;  // in the words of bus_words() or of a state
  const char* ours;
};

constexpr KnownDifference known_differences[] = {
    // Culler and Singh 1999, section 5.3.1, basic MSI: a write to a shared copy fetches the line again
    // (BusRdX), although the writer has it. Our msi asks only for permission. One transaction either way; the
    // same states and values.
    {"msi: write to a shared copy", "read-exclusive from memory", "upgrade"},

    // The common textbook MESI leaves a line that others hold clean to memory. Our mesi is the Illinois
    // protocol (Papamarcos and Patel, ISCA 1984): a clean copy supplies. The same states and values.
    {"mesi: read of a line that another cache holds clean", "read from memory", "read from sharer"},

    // El-Rewini and Abd-El-Barr 2005, table 4.11: if any cache holds the line, a cache supplies it. Our
    // dragon lets only owners supply; a clean copy leaves it to memory, which agrees with it when there is no
    // owner.
    {"dragon: read of a line that another cache holds clean", "read from sharer", "read from memory"},

    // El-Rewini and Abd-El-Barr 2005, example 6, step 7: a write to an SH-CLN copy when no other copy is
    // left. The text of table 4.11 always goes to SH-DRT. M. J. Flynn 1995, table F.11, goes to Dirty when no
    // cache raises the shared line; so does our dragon. An owner either way; the same value and broadcast.
    {"dragon: write to a shared copy that became the only one", "SH-DRT", "DIRTY"},
};

inline const KnownDifference& known_difference(const std::string& what) {
  for (const KnownDifference& difference : known_differences) {
    if (what != difference.what) continue;
    if (std::string(difference.published) == difference.ours) break;
    return difference;
  }
  throw std::out_of_range("no known difference: " + what);
}

}  // namespace earshot::test
