// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// pthread_create and what else concerns whole threads. Defined under the C library's own names, since
// std::thread calls them from inside the C++ library; the definition in the program comes first for it, too.
#include "threads.h"

#include <errno.h>
#include <pthread.h>
#include <sched.h>

#include "clocks.h"
#include "emit.h"
#include "futex.h"
#include "scheduler.h"

EARSHOT_REAL(pthread_create)
EARSHOT_REAL(pthread_join)
EARSHOT_REAL(pthread_tryjoin_np)
EARSHOT_REAL(pthread_timedjoin_np)
EARSHOT_REAL(pthread_clockjoin_np)
EARSHOT_REAL(pthread_detach)
EARSHOT_REAL(pthread_cancel)
EARSHOT_REAL(sched_yield)

namespace earshot::recorder {

namespace {

// The C library runs destructors of thread-specific data in rounds for as long as one asks for another, at
// most four times: ours stays until the last, so that nothing of the program's comes after it.
constexpr std::uintptr_t last_round = 4;

void thread_ends(void* round) {
  const auto this_round = reinterpret_cast<std::uintptr_t>(round);
  Thread* t = self;
  if (t == nullptr) return;
  if (this_round < last_round) {
    pthread_setspecific(run.leaving_key, reinterpret_cast<void*>(this_round + 1));
    return;
  }
  t->inside = true;
  if (run.one_at_a_time) {
    if (t->state == State::outside) come_back(t);  // cancelled there
    settle(t);
  }
  self = nullptr;
  last_turn(t);
}

void* thread_begins(void* thread) {
  auto* t = static_cast<Thread*>(thread);
  t->kernel_id = static_cast<pid_t>(system_call(SYS_gettid));
  self = t;
  pthread_setspecific(run.leaving_key, reinterpret_cast<void*>(std::uintptr_t{1}));
  if (run.one_at_a_time) first_turn(t);
  leaving(t);
  return t->start(t->argument);
}

// Waits until the thread has ended, or the deadline. Returns 0 or ETIMEDOUT.
int wait_for_end(Thread* t, pthread_t other, std::uint64_t deadline) {
  Thread* ending = find_thread(other);
  while (ending != nullptr && ending != t && !t->cancelled) {
    if (wait_for(t, ending, "pthread_join", deadline) == Wake::by_time) return ETIMEDOUT;
    ending = find_thread(other);
  }
  return 0;
}

}  // namespace

void watch_for_thread_ends() {
  pthread_key_create(&run.leaving_key, thread_ends);
  pthread_setspecific(run.leaving_key, reinterpret_cast<void*>(std::uintptr_t{1}));
}

int create_thread(pthread_t* handle, const pthread_attr_t* attributes, void* (*start)(void*),
                  void* argument) {
  Thread* t = entering();
  if (t == nullptr) return real::pthread_create(handle, attributes, start, argument);
  if (run.one_at_a_time) settle(t);
  Thread* child = new_thread();
  child->start = start;
  child->argument = argument;
  const int error = real::pthread_create(handle, attributes, &thread_begins, static_cast<void*>(child));
  if (error != 0) {
    forget_thread(child);
  } else if (run.one_at_a_time) {
    child->handle = *handle;
    child->has_handle = true;
    take_turn(t, 1);
  }
  leaving(t);
  return error;
}

}  // namespace earshot::recorder

using namespace earshot::recorder;  // definitions below stand for the C library's

EARSHOT_TAKES(int, pthread_create, pthread_t* handle, const pthread_attr_t* attributes, void* (*start)(void*),
              void* argument) {
  return create_thread(handle, attributes, start, argument);
}

EARSHOT_TAKES(int, pthread_join, pthread_t other, void** result) {
  if (Thread* t = modelling()) {
    settle(t);
    take_turn(t, 1);
    wait_for_end(t, other, no_deadline);
    leaving(t);
    stop_if_cancelled(t);
  }
  return real::pthread_join(other, result);  // at once by now
}

EARSHOT_TAKES(int, pthread_tryjoin_np, pthread_t other, void** result) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_tryjoin_np(other, result);
  settle(t);
  take_turn(t, 1);
  const bool busy = find_thread(other) != nullptr;
  leaving(t);
  return busy ? EBUSY : real::pthread_join(other, result);
}

EARSHOT_TAKES(int, pthread_clockjoin_np, pthread_t other, void** result, clockid_t clock,
              const timespec* until) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_clockjoin_np(other, result, clock, until);
  settle(t);
  take_turn(t, 1);
  const int error = wait_for_end(t, other, until != nullptr ? deadline_at(clock, *until) : no_deadline);
  leaving(t);
  stop_if_cancelled(t);
  return error != 0 ? error : real::pthread_join(other, result);
}

EARSHOT_TAKES(int, pthread_timedjoin_np, pthread_t other, void** result, const timespec* until) {
  if (!run.one_at_a_time) return real::pthread_timedjoin_np(other, result, until);
  return earshot_pthread_clockjoin_np(other, result, CLOCK_REALTIME, until);
}

EARSHOT_TAKES(int, pthread_detach, pthread_t other) {
  if (Thread* t = modelling()) {
    settle(t);
    take_turn(t, 1);
    leaving(t);
  }
  return real::pthread_detach(other);
}

EARSHOT_TAKES(int, pthread_cancel, pthread_t other) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_cancel(other);
  settle(t);
  const int error = real::pthread_cancel(other);
  Thread* target = error == 0 ? find_thread(other) : nullptr;
  if (target != nullptr) cancel_wait(target);
  leaving(t);
  return error;
}

EARSHOT_TAKES(int, sched_yield) {
  Thread* t = modelling();
  if (t == nullptr) return real::sched_yield();
  settle(t);
  run.now += 50;  // so that a loop of yields until some time ends
  hand_over(t);
  leaving(t);
  return 0;
}
EARSHOT_TAKES(int, pthread_yield) {
  return earshot_sched_yield();
}
EARSHOT_TAKES(void, thrd_yield) {
  earshot_sched_yield();
}

EARSHOT_PART(threads)
