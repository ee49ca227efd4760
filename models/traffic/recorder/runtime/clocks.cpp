// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Reading the time, and sleeping.
#include "clocks.h"

#include <errno.h>
#include <sys/time.h>
#include <threads.h>
#include <unistd.h>

#include "emit.h"
#include "scheduler.h"

EARSHOT_REAL(clock_gettime)
EARSHOT_REAL(gettimeofday)
EARSHOT_REAL(time)
EARSHOT_REAL(clock)
EARSHOT_REAL(timespec_get)
EARSHOT_REAL(nanosleep)
EARSHOT_REAL(clock_nanosleep)
EARSHOT_REAL(usleep)
EARSHOT_REAL(sleep)
EARSHOT_REAL(thrd_sleep)

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

// What the clock shows, in nanoseconds. Looking takes time, or a loop that only looks would not end.
std::uint64_t look_at_clock(Thread* t, clockid_t clock) {
  settle(t);
  take_turn(t, 50);
  return clock_at_start(clock) + run.now;
}

timespec to_timespec(std::uint64_t nanoseconds) {
  return {static_cast<time_t>(nanoseconds / second), static_cast<long>(nanoseconds % second)};
}

void sleep_until(Thread* t, std::uint64_t deadline, const char* call) {
  static const char nobody_wakes_sleepers = 0;
  settle(t);
  wait_for(t, &nobody_wakes_sleepers, call, deadline);
  leaving(t);
  stop_if_cancelled(t);
}

}  // namespace

EARSHOT_TAKES(int, clock_gettime, clockid_t clock, timespec* time) {
  Thread* t = modelling();
  if (t == nullptr) return real::clock_gettime(clock, time);
  *time = to_timespec(look_at_clock(t, clock));
  leaving(t);
  return 0;
}

EARSHOT_TAKES(int, gettimeofday, timeval* time, void* zone) {
  Thread* t = modelling();
  if (t == nullptr) return real::gettimeofday(time, zone);
  const timespec now = to_timespec(look_at_clock(t, CLOCK_REALTIME));
  if (time != nullptr) *time = {now.tv_sec, static_cast<suseconds_t>(now.tv_nsec / 1000)};
  leaving(t);
  return 0;
}

EARSHOT_TAKES(time_t, time, time_t* result) {
  Thread* t = modelling();
  if (t == nullptr) return real::time(result);
  const auto now = static_cast<time_t>(look_at_clock(t, CLOCK_REALTIME) / second);
  if (result != nullptr) *result = now;
  leaving(t);
  return now;
}

EARSHOT_TAKES(clock_t, clock) {
  Thread* t = modelling();
  if (t == nullptr) return real::clock();
  const auto now =
      static_cast<clock_t>(look_at_clock(t, CLOCK_PROCESS_CPUTIME_ID) / (second / CLOCKS_PER_SEC));
  leaving(t);
  return now;
}

EARSHOT_TAKES(int, timespec_get, timespec* time, int base) {
  Thread* t = base == TIME_UTC ? modelling() : nullptr;
  if (t == nullptr) return real::timespec_get(time, base);
  *time = to_timespec(look_at_clock(t, CLOCK_REALTIME));
  leaving(t);
  return base;
}

EARSHOT_TAKES(int, nanosleep, const timespec* span, timespec* rest) {
  Thread* t = is_valid(*span) ? modelling() : nullptr;
  if (t == nullptr) return real::nanosleep(span, rest);
  sleep_until(t, deadline_in(*span), "nanosleep");
  return 0;
}

EARSHOT_TAKES(int, clock_nanosleep, clockid_t clock, int flags, const timespec* time, timespec* rest) {
  Thread* t = is_valid(*time) ? modelling() : nullptr;
  if (t == nullptr) return real::clock_nanosleep(clock, flags, time, rest);
  const bool absolute = (flags & TIMER_ABSTIME) != 0;
  sleep_until(t, absolute ? deadline_at(clock, *time) : deadline_in(*time), "clock_nanosleep");
  return 0;
}

EARSHOT_TAKES(int, usleep, useconds_t span) {
  Thread* t = modelling();
  if (t == nullptr) return real::usleep(span);
  sleep_until(t, deadline_in(to_timespec(std::uint64_t{span} * 1000)), "usleep");
  return 0;
}

EARSHOT_TAKES(unsigned, sleep, unsigned span) {
  Thread* t = modelling();
  if (t == nullptr) return real::sleep(span);
  sleep_until(t, deadline_in(to_timespec(span * second)), "sleep");
  return 0;
}

EARSHOT_TAKES(int, thrd_sleep, const timespec* span, timespec* rest) {
  Thread* t = is_valid(*span) ? modelling() : nullptr;
  if (t == nullptr) return real::thrd_sleep(span, rest);
  sleep_until(t, deadline_in(*span), "thrd_sleep");
  return 0;
}

EARSHOT_PART(clocks)
