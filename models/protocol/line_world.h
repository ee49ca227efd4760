// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Private to this room: one line in n caches and in memory, and what a protocol event does to it.
//
// Values are abstracted to one bit, "fresh": the copy holds everything that was written so far. That is
// enough, because a protocol looks at states and never at values. A write keeps the writer's copy as fresh as
// it was and makes every copy that does not receive the word stale; a fetch copies the freshness of what was
// supplied.
#pragma once

#include <array>
#include <string>
#include <vector>

#include "earshot/protocol/table.h"

namespace earshot {

constexpr int max_proved_caches = 8;

struct Copy {
  StateId state = absent;
  bool fresh = false;  // false if absent
};

struct LineWorld {
  int caches = 0;
  std::array<Copy, max_proved_caches> copies{};
  bool memory_fresh = true;  // the initial world: no copies, memory agrees with itself
};

// What happened during one event, for whoever wants to tell.
struct StepStory {
  // "bus read (A supplies, memory takes it, shared)"
  std::vector<std::string> transactions;
  // For each cache, the states it was in, the first included.
  std::array<std::vector<StateId>, max_proved_caches> visited;
};

// "A" for cache 0.
std::string cache_name(int cache);

// Lets the processor of `cache` do `event` (read, write or replace) as one atomic step. Returns the empty
// string, or what is wrong in a sentence: a missing row, an event that is not served, or a broken rule
// afterwards. `story` may be null.
std::string take_step(const Table& table, LineWorld& world, int cache, Event event, StepStory* story);

// The same for an I/O port, which keeps no copy: `event` is snoop_io_read or snoop_io_write.
std::string take_io_step(const Table& table, LineWorld& world, Event event, StepStory* story);

}  // namespace earshot
