// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The virtual clocks that the program sees one at a time. CLOCK_REALTIME and its kin begin on 1 January 2000,
// CLOCK_MONOTONIC and its kin at 1000 seconds; clocks of processor time at 0.
#pragma once

#include <pthread.h>
#include <time.h>

#include "thread.h"

namespace earshot::recorder {

constexpr std::uint64_t second = 1'000'000'000;  // nanoseconds

inline std::uint64_t clock_at_start(clockid_t clock) {
  switch (clock) {
    case CLOCK_REALTIME:
    case CLOCK_REALTIME_COARSE:
    case CLOCK_REALTIME_ALARM:
    case CLOCK_TAI:
      return 946'684'800 * second;
    case CLOCK_PROCESS_CPUTIME_ID:
    case CLOCK_THREAD_CPUTIME_ID:
      return 0;
    default:
      return 1000 * second;
  }
}

// The moment `span` from now.
inline std::uint64_t deadline_in(const timespec& span) {
  return run.now + static_cast<std::uint64_t>(span.tv_sec) * second +
         static_cast<std::uint64_t>(span.tv_nsec);
}

// The moment when `clock` shows `time`; now, if that has passed.
inline std::uint64_t deadline_at(clockid_t clock, const timespec& time) {
  if (time.tv_sec < 0) return run.now;
  const auto seconds = static_cast<std::uint64_t>(time.tv_sec);
  if (seconds > no_deadline / second - 1) return no_deadline - 1;
  const std::uint64_t shown = seconds * second + static_cast<std::uint64_t>(time.tv_nsec);
  const std::uint64_t start = clock_at_start(clock);
  return shown > start + run.now ? shown - start : run.now;
}

inline bool is_valid(const timespec& time) {
  return time.tv_nsec >= 0 && time.tv_nsec < 1'000'000'000;
}

// After a wait that is a cancellation point, outside the runtime: ends the thread if it was cancelled.
inline void stop_if_cancelled(Thread* t) {
  if (t->cancelled) pthread_testcancel();
}

}  // namespace earshot::recorder
