// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// syscall(), because waiting on a futex blocks: libstdc++ does so in std::atomic::wait(), std::latch,
// std::barrier, std::counting_semaphore and the initialisation of local static variables.
#include <errno.h>
#include <limits.h>
#include <stdarg.h>

#include "clocks.h"
#include "emit.h"
#include "futex.h"
#include "scheduler.h"

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

// The calls below answer as the kernel does: negative is an error number.
long wait_on_futex(Thread* t, const std::uint32_t* word, std::uint32_t expected, std::uint64_t deadline) {
  take_turn(t, 1);
  if (__atomic_load_n(word, __ATOMIC_SEQ_CST) != expected) return -EAGAIN;
  return wait_for(t, word, "syscall(SYS_futex)", deadline) == Wake::by_time ? -ETIMEDOUT : 0;
}

long wake_futex(Thread* t, const std::uint32_t* word, long how_many) {
  const int woken = wake_waiting(word, how_many > INT_MAX ? INT_MAX : static_cast<int>(how_many));
  take_turn(t, 1);
  return woken;
}

bool is_modelled(long operation) {
  switch (operation & ~(FUTEX_PRIVATE_FLAG | FUTEX_CLOCK_REALTIME)) {
    case FUTEX_WAIT:
    case FUTEX_WAIT_BITSET:
    case FUTEX_WAKE:
    case FUTEX_WAKE_BITSET:
      return true;
    default:
      return false;
  }
}

long model_futex(Thread* t, const std::uint32_t* word, long operation, long value, const timespec* time) {
  const long clock = (operation & FUTEX_CLOCK_REALTIME) != 0 ? CLOCK_REALTIME : CLOCK_MONOTONIC;
  const auto expected = static_cast<std::uint32_t>(value);
  switch (operation & ~(FUTEX_PRIVATE_FLAG | FUTEX_CLOCK_REALTIME)) {
    case FUTEX_WAIT:
      return wait_on_futex(t, word, expected, time != nullptr ? deadline_in(*time) : no_deadline);
    case FUTEX_WAIT_BITSET:
      return wait_on_futex(t, word, expected,
                           time != nullptr ? deadline_at(static_cast<clockid_t>(clock), *time) : no_deadline);
    default:
      return wake_futex(t, word, value);
  }
}

}  // namespace

EARSHOT_TAKES(long, syscall, long number, ...) {
  va_list list;
  va_start(list, number);
  const long a = va_arg(list, long);
  const long b = va_arg(list, long);
  const long c = va_arg(list, long);
  const long d = va_arg(list, long);
  const long e = va_arg(list, long);
  const long f = va_arg(list, long);
  va_end(list);
  Thread* t = number == SYS_futex && is_modelled(b) ? modelling() : nullptr;
  long result;
  if (t != nullptr) {
    settle(t);
    result =
        model_futex(t, reinterpret_cast<const std::uint32_t*>(a), b, c, reinterpret_cast<const timespec*>(d));
    leaving(t);
  } else {
    result = system_call(number, a, b, c, d, e, f);
  }
  if (result < 0 && result > -4096) {
    errno = static_cast<int>(-result);
    return -1;
  }
  return result;
}

EARSHOT_PART(futex_calls)
