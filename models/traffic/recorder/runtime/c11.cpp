// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// C11 threads. In the GNU C library they are the POSIX ones under other names, which its own definitions
// reach by internal names that cannot be taken: so each is taken here and sent to its POSIX namesake.
#include <errno.h>
#include <pthread.h>
#include <stdint.h>
#include <threads.h>

#include "emit.h"
#include "scheduler.h"
#include "threads.h"

EARSHOT_REAL(thrd_create)
EARSHOT_REAL(thrd_join)
EARSHOT_REAL(thrd_detach)
EARSHOT_REAL(mtx_lock)
EARSHOT_REAL(mtx_trylock)
EARSHOT_REAL(mtx_timedlock)
EARSHOT_REAL(mtx_unlock)
EARSHOT_REAL(cnd_wait)
EARSHOT_REAL(cnd_timedwait)
EARSHOT_REAL(cnd_signal)
EARSHOT_REAL(cnd_broadcast)
EARSHOT_REAL(call_once)

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

int thread_result(int error) {
  switch (error) {
    case 0:
      return thrd_success;
    case ENOMEM:
      return thrd_nomem;
    case ETIMEDOUT:
      return thrd_timedout;
    case EBUSY:
      return thrd_busy;
    default:
      return thrd_error;
  }
}

pthread_mutex_t* posix(mtx_t* mutex) {
  return reinterpret_cast<pthread_mutex_t*>(mutex);
}
pthread_cond_t* posix(cnd_t* condition) {
  return reinterpret_cast<pthread_cond_t*>(condition);
}

// Calling a function of one type through another is not portable; both return in the same register here, and
// the C library itself takes its result as an int.
using PosixStart = void* (*)(void*);

}  // namespace

EARSHOT_TAKES(int, thrd_create, thrd_t* handle, thrd_start_t start, void* argument) {
  if (self == nullptr) return real::thrd_create(handle, start, argument);
  auto* posix_start = reinterpret_cast<PosixStart>(reinterpret_cast<void*>(start));
  return thread_result(create_thread(handle, nullptr, posix_start, argument));
}
EARSHOT_TAKES(int, thrd_join, thrd_t other, int* result) {
  if (!run.one_at_a_time) return real::thrd_join(other, result);
  void* value = nullptr;
  const int error = pthread_join(other, &value);
  if (result != nullptr) *result = static_cast<int>(reinterpret_cast<intptr_t>(value));
  return thread_result(error);
}
EARSHOT_TAKES(int, thrd_detach, thrd_t other) {
  if (!run.one_at_a_time) return real::thrd_detach(other);
  return thread_result(pthread_detach(other));
}

EARSHOT_TAKES(int, mtx_lock, mtx_t* mutex) {
  if (!run.one_at_a_time) return real::mtx_lock(mutex);
  return thread_result(pthread_mutex_lock(posix(mutex)));
}
EARSHOT_TAKES(int, mtx_trylock, mtx_t* mutex) {
  if (!run.one_at_a_time) return real::mtx_trylock(mutex);
  return thread_result(pthread_mutex_trylock(posix(mutex)));
}
EARSHOT_TAKES(int, mtx_timedlock, mtx_t* mutex, const timespec* until) {
  if (!run.one_at_a_time) return real::mtx_timedlock(mutex, until);
  return thread_result(pthread_mutex_timedlock(posix(mutex), until));
}
EARSHOT_TAKES(int, mtx_unlock, mtx_t* mutex) {
  if (!run.one_at_a_time) return real::mtx_unlock(mutex);
  return thread_result(pthread_mutex_unlock(posix(mutex)));
}

EARSHOT_TAKES(int, cnd_wait, cnd_t* condition, mtx_t* mutex) {
  if (!run.one_at_a_time) return real::cnd_wait(condition, mutex);
  return thread_result(pthread_cond_wait(posix(condition), posix(mutex)));
}
EARSHOT_TAKES(int, cnd_timedwait, cnd_t* condition, mtx_t* mutex, const timespec* until) {
  if (!run.one_at_a_time) return real::cnd_timedwait(condition, mutex, until);
  return thread_result(pthread_cond_timedwait(posix(condition), posix(mutex), until));
}
EARSHOT_TAKES(int, cnd_signal, cnd_t* condition) {
  if (!run.one_at_a_time) return real::cnd_signal(condition);
  return thread_result(pthread_cond_signal(posix(condition)));
}
EARSHOT_TAKES(int, cnd_broadcast, cnd_t* condition) {
  if (!run.one_at_a_time) return real::cnd_broadcast(condition);
  return thread_result(pthread_cond_broadcast(posix(condition)));
}

EARSHOT_TAKES(void, call_once, once_flag* once, void (*routine)()) {
  if (!run.one_at_a_time) return real::call_once(once, routine);
  pthread_once(reinterpret_cast<pthread_once_t*>(once), routine);
}

EARSHOT_PART(c11)
