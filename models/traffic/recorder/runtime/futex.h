// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// System calls of the runtime, made directly: the C library's wrappers may be taken by us, and set errno.
#pragma once

#include <linux/futex.h>
#include <sys/syscall.h>
#include <time.h>

#include <cstdint>

namespace earshot::recorder {

// The kernel's answer: negative is an error number.
long system_call(long number, long a = 0, long b = 0, long c = 0, long d = 0, long e = 0, long f = 0);

constexpr std::int64_t no_timeout = -1;

// Waits until woken, the word is no longer `seen`, or `nanoseconds` have passed; may return for no reason.
// Works across processes.
inline void futex_wait(std::uint32_t* word, std::uint32_t seen, std::int64_t nanoseconds = no_timeout) {
  timespec limit{static_cast<time_t>(nanoseconds / 1'000'000'000),
                 static_cast<long>(nanoseconds % 1'000'000'000)};
  system_call(SYS_futex, reinterpret_cast<long>(word), FUTEX_WAIT, static_cast<long>(seen),
              nanoseconds < 0 ? 0 : reinterpret_cast<long>(&limit));
}

inline void futex_wake(std::uint32_t* word, int how_many) {
  system_call(SYS_futex, reinterpret_cast<long>(word), FUTEX_WAKE, how_many);
}

// Whether that process no longer exists, so that nobody empties the ring.
inline bool recorder_is_gone(std::int32_t recorder_process) {
  return system_call(SYS_kill, recorder_process, 0) == -3;  // ESRCH
}

}  // namespace earshot::recorder
