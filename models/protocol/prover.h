// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The prover visits every reachable global state of n caches and one line under a Table and checks that the
// protocol is sound. Exhaustive explicit-state search, breadth first, so a counterexample is a shortest one.
// Caches are interchangeable, so states that differ only by which cache is which are visited once
// (symmetry folding: C. N. Ip and D. L. Dill, "Better Verification Through Symmetry", 1996).
#pragma once

#include <cstdint>
#include <set>
#include <string>
#include <utility>
#include <vector>

#include "earshot/protocol/table.h"

namespace earshot {

struct Proof {
  bool sound = false;
  int caches = 0;
  std::uint64_t folded_states = 0;    // reachable global states, permutations of caches counted once
  std::uint64_t unfolded_states = 0;  // the same, every permutation counted
  // Pairs of states that two caches hold at the same time in some reachable state (both orders present).
  std::set<std::pair<StateId, StateId>> coexisting;
  std::string violation;           // empty if sound: which rule is broken, in a sentence
  std::vector<std::string> steps;  // a shortest sequence of events leading to it, one printable line each
};

// REQUIRES: 1 <= caches <= 8. The five rules: at most one owner; a copy that may be written silently is the
// only copy; every readable copy holds the last value written; with no owner, memory holds it; every
// reachable (state, event) has exactly one row.
Proof prove(const Table& table, int caches);

// The proof as the user sees it: the verdict, the counts, and for a failure the steps.
std::string describe(const Table& table, const Proof& proof);

}  // namespace earshot
