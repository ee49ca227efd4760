// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Synthetic traffic: the ways in which programs share data, each distilled into a stream of accesses that
// depends only on its configuration, on every machine. The kinds are those by which the literature sorts
// shared data: Weber and Gupta, "Analysis of cache invalidation patterns in multiprocessors", ASPLOS 1989
// (read-only, migratory, mostly-read, frequently read/written); Torrellas, Lam and Hennessy, "False sharing
// and spatial locality in multiprocessor caches", IEEE Transactions on Computers 43(6), 1994. Kernel-free. A
// source belongs to one thread at a time.
#pragma once

#include <cstdint>
#include <memory>
#include <stdexcept>
#include <string>
#include <vector>

#include "earshot/traffic/recording.h"

namespace earshot {

// In all kinds: the n-th access of every initiator comes before the (n+1)-th of any, initiator 0 first; an
// access is one word of `word_bytes`, aligned; a write carries a value that no other write of the pattern
// carries (as far as the word is wide enough: it is (n + 1) * 64 + initiator, cut to the word); a read
// carries none.
//
// L is `lines`, W the words in a line, I the number of initiators; "random" is uniform over what is named,
// from the seed and the initiator alone; "writes" a share `write_percent` of an initiator's accesses, drawn
// at random.
//
//   private            Initiator i reads and writes random words of its own L lines, the i-th group of L.
//   read-shared        All read random words of the same L lines. Initiator 0 also writes; the others never
//   do. producer-consumer  A ring of L * W words. The n-th access of initiator 0 writes word n of the ring,
//   the n-th of
//                      every other reads it: each value is written once and read once by each consumer.
//                      Needs two initiators. `write_percent` and `seed` have no effect.
//   migratory          An object is the first word of a line. In its accesses 2n and 2n + 1 initiator i
//   reads, then
//                      writes object (n - i) modulo L: an object goes from each initiator to the next, and no
//                      two use the same at once. Needs L >= I. `write_percent` and `seed` have no effect.
//   false-sharing      Initiator i reads and writes only word i of a line, of a random one of the L lines:
//   all lines
//                      are shared, no word is. Needs W >= I.
//   uniform            All read and write random words of the same L lines.
struct PatternConfig {
  std::string kind = "uniform";    // a name of pattern_kinds()
  std::uint32_t initiators = 4;    // 1 to most_initiators
  std::uint64_t accesses = 10000;  // per initiator
  std::uint64_t seed = 1;
  std::uint32_t write_percent = 30;
  std::uint32_t word_bytes = 4;   // 1, 2, 4 or 8
  std::uint32_t line_bytes = 64;  // power of two, 8 to 256. Larger: more words share a line
  std::uint32_t lines = 64;  // 1 to 2^20. Larger: fewer accesses meet in a line, and fewer fit into a cache
  std::uint64_t base = 0;    // address of the first line, a multiple of line_bytes
};

// The kinds, in the order above.
const std::vector<std::string>& pattern_kinds();

// What is wrong with a configuration: all of it, a line each, "KEY VALUE, expected ...".
class PatternError : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

// With `only` set, yields that initiator's accesses alone, in order: none if the pattern has no such
// initiator. Throws PatternError.
std::unique_ptr<AccessSource> make_pattern(const PatternConfig& config, std::uint32_t only = every_initiator);

}  // namespace earshot
