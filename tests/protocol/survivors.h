// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The changes to a built-in table that leave it sound, and why each of them does. mutation.cpp finds exactly
// these.
#pragma once

#include <string>
#include <vector>

namespace earshot {

enum class Reason {
  // No sequence of events shows a difference in any transaction: the same protocol, written differently.
  equivalent,
  // All others are sound but cost traffic, so they show in the transactions (step tables, Flynn's tables,
  // counters).
  drops_copy,       // gives up a copy that it could have kept: a miss later
  forgets_alone,    // does not know that it is the only copy: a transaction for a write that needs none
  owns_clean,       // owns a line that memory holds as well: a write-back or a supply that nobody needs
  memory_supplies,  // leaves to memory what a clean copy could have supplied: the same data from elsewhere
  fetches_again,    // fetches a line that it holds, where permission would do
  miscounts,        // counts an update too many or too few: the copy goes at another time than the limit says
};

struct Survivors {
  const char* table;
  Reason reason;
  std::vector<std::string> mutants;
};

inline const std::vector<Survivors>& expected_survivors() {
  // clang-format off
  static const std::vector<Survivors> survivors = {
      {"write-through-update", Reason::drops_copy, {
          "V write: next I", "V snoop-read: next I", "V snoop-write-through: next I",
          "V snoop-io-read: next I", "V snoop-io-write: next I"}},

      // The write is judged again in D instead of V, and both broadcast it and end in D.
      {"dirty-owner-update", Reason::equivalent, {"I write: next D"}},
      {"dirty-owner-update", Reason::drops_copy, {
          "V snoop-read: next I", "V snoop-update: next I", "D snoop-update: next I",
          "V snoop-io-read: next I", "V snoop-io-write: next I"}},

      // The write is judged again in M or Sm, where it does what it would have done in E or Sc.
      {"dragon", Reason::equivalent, {"I write alone: next M", "I write shared: next Sm"}},
      {"dragon", Reason::drops_copy, {
          "E snoop-read: next I", "Sc snoop-read: next I", "Sc snoop-update: next I",
          "Sm snoop-update: next I", "E snoop-io-read: next I", "E snoop-io-write: next I",
          "Sc snoop-io-read: next I", "Sc snoop-io-write: next I"}},
      {"dragon", Reason::forgets_alone, {
          "I read alone: next Sc", "I write alone: next Sc", "I write alone: next Sm", "E read: next Sc",
          "E write: next Sm", "Sc write alone: next Sm", "Sm write alone: next Sm", "M read: next Sm",
          "M write: next Sm", "E snoop-io-read: next Sc", "E snoop-io-write: next Sc",
          "M snoop-io-read: next Sm", "M snoop-io-write: next Sm"}},
      {"dragon", Reason::owns_clean, {
          "I read alone: next Sm", "I read alone: next M", "E read: next Sm", "E read: next M",
          "E snoop-read: next Sm", "E snoop-io-read: next Sm", "E snoop-io-read: next M",
          "E snoop-io-write: next Sm", "E snoop-io-write: next M"}},

      {"firefly", Reason::equivalent, {"I write alone: next D"}},
      {"firefly", Reason::drops_copy, {
          "VE snoop-read: next I", "S write shared: next I", "S write alone: next I",
          "S snoop-read: next I", "S snoop-write-through: next I", "D snoop-read: next I",
          "VE snoop-io-read: next I", "VE snoop-io-write: next I", "S snoop-io-read: next I",
          "S snoop-io-write: next I"}},
      {"firefly", Reason::forgets_alone, {
          "I read alone: next S", "I write alone: next S", "VE read: next S", "S write alone: next S",
          "VE snoop-io-read: next S", "VE snoop-io-write: next S"}},
      {"firefly", Reason::owns_clean, {
          "I read alone: next D", "VE read: next D", "S write alone: next D", "VE snoop-io-read: next D",
          "VE snoop-io-write: next D"}},
      {"firefly", Reason::memory_supplies, {
          "VE snoop-read: no supply", "S snoop-read: no supply", "VE snoop-io-read: no supply",
          "S snoop-io-read: no supply"}},

      {"competitive-update", Reason::equivalent, {
          "I write alone: next M", "I write shared: next Sc/1", "I write shared: next Sm"}},
      {"competitive-update", Reason::drops_copy, {
          "E snoop-read: next I", "Sc/0 snoop-read: next I", "Sc/0 snoop-update: next I",
          "Sc/1 snoop-read: next I", "Sm snoop-update: next I", "E snoop-io-read: next I",
          "E snoop-io-write: next I", "Sc/0 snoop-io-read: next I", "Sc/0 snoop-io-write: next I",
          "Sc/1 snoop-io-read: next I"}},
      {"competitive-update", Reason::forgets_alone, {
          "I read alone: next Sc/0", "I read alone: next Sc/1", "I write alone: next Sc/0",
          "I write alone: next Sc/1", "I write alone: next Sm", "E read: next Sc/0", "E read: next Sc/1",
          "E write: next Sm", "Sc/0 write alone: next Sm", "Sc/1 write alone: next Sm",
          "Sm write alone: next Sm", "M read: next Sm", "M write: next Sm", "E snoop-io-read: next Sc/0",
          "E snoop-io-read: next Sc/1", "E snoop-io-write: next Sc/0", "E snoop-io-write: next Sc/1",
          "M snoop-io-read: next Sm", "M snoop-io-write: next Sm"}},
      {"competitive-update", Reason::owns_clean, {
          "I read alone: next Sm", "I read alone: next M", "E read: next Sm", "E read: next M",
          "E snoop-read: next Sm", "E snoop-io-read: next Sm", "E snoop-io-read: next M",
          "E snoop-io-write: next Sm", "E snoop-io-write: next M"}},
      {"competitive-update", Reason::miscounts, {
          "I read shared: next Sc/1", "E snoop-read: next Sc/1", "Sc/0 read: next Sc/1",
          "Sc/0 snoop-read: next Sc/1", "Sc/0 snoop-update: next Sc/0", "Sc/1 read: next Sc/1",
          "Sc/1 snoop-read: next Sc/0", "Sm snoop-update: next Sc/0", "Sc/0 snoop-io-read: next Sc/1",
          "Sc/0 snoop-io-write: next Sc/0", "Sc/1 snoop-io-read: next Sc/0"}},

      {"msi", Reason::drops_copy, {
          "S snoop-read: next I", "M snoop-read: next I", "S snoop-io-read: next I"}},
      {"msi", Reason::fetches_again, {"S write: bus read-exclusive"}},

      {"mesi", Reason::drops_copy, {
          "E snoop-read: next I", "S snoop-read: next I", "M snoop-read: next I", "E snoop-io-read: next I",
          "S snoop-io-read: next I"}},
      {"mesi", Reason::forgets_alone, {"I read alone: next S", "E read: next S", "E snoop-io-read: next S"}},
      {"mesi", Reason::owns_clean, {"I read alone: next M", "E read: next M", "E snoop-io-read: next M"}},
      {"mesi", Reason::memory_supplies, {
          "E snoop-read: no supply", "E snoop-read-exclusive: no supply", "S snoop-read: no supply",
          "S snoop-read-exclusive: no supply", "E snoop-io-read: no supply", "S snoop-io-read: no supply"}},
      {"mesi", Reason::fetches_again, {"S write: bus read-exclusive"}},

      {"moesi", Reason::drops_copy, {
          "E snoop-read: next I", "S snoop-read: next I", "E snoop-io-read: next I",
          "S snoop-io-read: next I"}},
      {"moesi", Reason::forgets_alone, {
          "I read alone: next S", "I write: next O", "E read: next S", "E write: next O", "S write: next O",
          "O write: next O", "M read: next O", "M write: next O", "E snoop-io-read: next S",
          "M snoop-io-read: next O"}},
      {"moesi", Reason::owns_clean, {
          "I read alone: next O", "I read alone: next M", "E read: next O", "E read: next M",
          "E snoop-read: next O", "E snoop-io-read: next O", "E snoop-io-read: next M"}},
      {"moesi", Reason::fetches_again, {"S write: bus read-exclusive"}},

      {"berkeley", Reason::drops_copy, {
          "Valid snoop-read: next Invalid", "Valid snoop-io-read: next Invalid"}},
      {"berkeley", Reason::forgets_alone, {
          "Invalid write: next Shared-Dirty", "Valid write: next Shared-Dirty",
          "Shared-Dirty write: next Shared-Dirty", "Dirty read: next Shared-Dirty",
          "Dirty write: next Shared-Dirty", "Dirty snoop-io-read: next Shared-Dirty"}},
      {"berkeley", Reason::fetches_again, {"Valid write: bus read-exclusive"}},

      {"write-once", Reason::drops_copy, {
          "V write: next I", "V snoop-read: next I", "R snoop-read: next I", "D snoop-read: next I",
          "V snoop-io-read: next I", "R snoop-io-read: next I"}},
      {"write-once", Reason::forgets_alone, {"V write: next V", "R read: next V", "R snoop-io-read: next V"}},
      {"write-once", Reason::owns_clean, {"V write: next D", "R read: next D", "R snoop-io-read: next D"}},
  };
  // clang-format on
  return survivors;
}

}  // namespace earshot
