// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Condition variables and barriers, which are modelled entirely; semaphores, which are the C library's with
// our waiting; and the part of pthread_once() that does not need unwinding.
#include <errno.h>
#include <limits.h>
#include <pthread.h>
#include <semaphore.h>

#include "clocks.h"
#include "emit.h"
#include "locks.h"
#include "scheduler.h"

EARSHOT_REAL(pthread_cond_wait)
EARSHOT_REAL(pthread_cond_timedwait)
EARSHOT_REAL(pthread_cond_clockwait)
EARSHOT_REAL(pthread_cond_signal)
EARSHOT_REAL(pthread_cond_broadcast)
EARSHOT_REAL(pthread_barrier_init)
EARSHOT_REAL(pthread_barrier_destroy)
EARSHOT_REAL(pthread_barrier_wait)
EARSHOT_REAL(sem_wait)
EARSHOT_REAL(sem_trywait)
EARSHOT_REAL(sem_timedwait)
EARSHOT_REAL(sem_clockwait)
EARSHOT_REAL(sem_post)
EARSHOT_REAL(pthread_once)

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

clockid_t clock_of([[maybe_unused]] const pthread_cond_t* condition) {
#if defined(__GLIBC__)
  return (condition->__data.__wrefs & 2) != 0 ? CLOCK_MONOTONIC : CLOCK_REALTIME;
#else
  return CLOCK_REALTIME;
#endif
}

int wait_on_condition(Thread* t, pthread_cond_t* condition, pthread_mutex_t* mutex, const char* call,
                      std::uint64_t deadline) {
  settle(t);
  int error = unlock_mutex(mutex);
  if (error == 0) {
    const Wake wake = wait_for(t, condition, call, deadline);
    error = lock_mutex(t, mutex, call, no_deadline);
    if (error == 0 && wake == Wake::by_time) error = ETIMEDOUT;
  }
  leaving(t);
  stop_if_cancelled(t);
  return error;
}

int wake_condition(Thread* t, const pthread_cond_t* condition, int how_many) {
  settle(t);
  take_turn(t, 1);
  wake_waiting(condition, how_many);
  leaving(t);
  return 0;
}

// What a pthread_barrier_t holds one at a time.
struct Barrier {
  unsigned needed;
  unsigned arrived;
  unsigned generation;
};
static_assert(sizeof(Barrier) <= sizeof(pthread_barrier_t));

int wait_on_semaphore(Thread* t, sem_t* semaphore, const char* call, std::uint64_t deadline) {
  settle(t);
  take_turn(t, 1);
  int result = real::sem_trywait(semaphore);
  bool in_time = true;
  while (result != 0 && errno == EAGAIN && in_time && !t->cancelled) {
    in_time = deadline > run.now && wait_for(t, semaphore, call, deadline) != Wake::by_time;
    result = real::sem_trywait(semaphore);
  }
  if (result != 0 && errno == EAGAIN) errno = ETIMEDOUT;
  leaving(t);
  if (result != 0) stop_if_cancelled(t);
  return result;
}

}  // namespace

EARSHOT_TAKES(int, pthread_cond_wait, pthread_cond_t* condition, pthread_mutex_t* mutex) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_cond_wait(condition, mutex);
  return wait_on_condition(t, condition, mutex, "pthread_cond_wait", no_deadline);
}
EARSHOT_TAKES(int, pthread_cond_timedwait, pthread_cond_t* condition, pthread_mutex_t* mutex,
              const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_cond_timedwait(condition, mutex, until);
  const std::uint64_t deadline = deadline_at(clock_of(condition), *until);
  return wait_on_condition(t, condition, mutex, "pthread_cond_timedwait", deadline);
}
EARSHOT_TAKES(int, pthread_cond_clockwait, pthread_cond_t* condition, pthread_mutex_t* mutex, clockid_t clock,
              const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_cond_clockwait(condition, mutex, clock, until);
  return wait_on_condition(t, condition, mutex, "pthread_cond_clockwait", deadline_at(clock, *until));
}
EARSHOT_TAKES(int, pthread_cond_signal, pthread_cond_t* condition) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_cond_signal(condition);
  return wake_condition(t, condition, 1);
}
EARSHOT_TAKES(int, pthread_cond_broadcast, pthread_cond_t* condition) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_cond_broadcast(condition);
  return wake_condition(t, condition, INT_MAX);
}

EARSHOT_TAKES(int, pthread_barrier_init, pthread_barrier_t* barrier, const pthread_barrierattr_t* attributes,
              unsigned needed) {
  if (!run.one_at_a_time) return real::pthread_barrier_init(barrier, attributes, needed);
  if (needed == 0) return EINVAL;
  *reinterpret_cast<Barrier*>(barrier) = {needed, 0, 0};
  return 0;
}
EARSHOT_TAKES(int, pthread_barrier_destroy, pthread_barrier_t* barrier) {
  return run.one_at_a_time ? 0 : real::pthread_barrier_destroy(barrier);
}
EARSHOT_TAKES(int, pthread_barrier_wait, pthread_barrier_t* barrier) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_barrier_wait(barrier);
  settle(t);
  take_turn(t, 1);
  auto* b = reinterpret_cast<Barrier*>(barrier);
  const unsigned generation = b->generation;
  const bool last = ++b->arrived == b->needed;
  if (last) {
    b->arrived = 0;
    ++b->generation;
    wake_waiting(b);
  }
  while (b->generation == generation) wait_for(t, b, "pthread_barrier_wait");
  leaving(t);
  return last ? PTHREAD_BARRIER_SERIAL_THREAD : 0;
}

EARSHOT_TAKES(int, sem_wait, sem_t* semaphore) {
  Thread* t = modelling();
  if (t == nullptr) return real::sem_wait(semaphore);
  return wait_on_semaphore(t, semaphore, "sem_wait", no_deadline);
}
EARSHOT_TAKES(int, sem_trywait, sem_t* semaphore) {
  Thread* t = modelling();
  if (t == nullptr) return real::sem_trywait(semaphore);
  settle(t);
  take_turn(t, 1);
  const int result = real::sem_trywait(semaphore);
  leaving(t);
  return result;
}
EARSHOT_TAKES(int, sem_timedwait, sem_t* semaphore, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::sem_timedwait(semaphore, until);
  return wait_on_semaphore(t, semaphore, "sem_timedwait", deadline_at(CLOCK_REALTIME, *until));
}
EARSHOT_TAKES(int, sem_clockwait, sem_t* semaphore, clockid_t clock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::sem_clockwait(semaphore, clock, until);
  return wait_on_semaphore(t, semaphore, "sem_clockwait", deadline_at(clock, *until));
}
EARSHOT_TAKES(int, sem_post, sem_t* semaphore) {
  Thread* t = modelling();
  if (t == nullptr) return real::sem_post(semaphore);
  settle(t);
  const int result = real::sem_post(semaphore);
  if (result == 0) wake_waiting(semaphore, 1);
  take_turn(t, 1);
  leaving(t);
  return result;
}

// For once.c. The numbers are those of the GNU C library, since not every caller comes through here.
namespace {
constexpr int once_running = 1;
constexpr int once_done = 2;
}  // namespace

extern "C" int earshot_once_is_modelled() {
  Thread* t = modelling();
  if (t == nullptr) return 0;
  leaving(t);
  return 1;
}

extern "C" int earshot_once_real(pthread_once_t* once, void (*routine)()) {
  return real::pthread_once(once, routine);
}

// Whether the caller must run the routine. Waits while another thread does.
extern "C" int earshot_once_begin(pthread_once_t* once) {
  Thread* t = entering();
  settle(t);
  take_turn(t, 1);
  while (*once == once_running) wait_for(t, once, "pthread_once");
  const bool mine = *once != once_done;
  if (mine) *once = once_running;
  leaving(t);
  return mine;
}

// The routine has returned, or was left by an exception or the end of the thread: then it may be run again.
extern "C" void earshot_once_end(pthread_once_t* once, int done) {
  Thread* t = entering();
  if (t != nullptr) settle(t);
  *once = done != 0 ? once_done : 0;
  wake_waiting(once);
  if (t != nullptr) leaving(t);
}

EARSHOT_PART(waits)
