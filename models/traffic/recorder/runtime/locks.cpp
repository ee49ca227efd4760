// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Mutexes, read-write locks and spin locks. The lock itself is the C library's, so that its kinds and its
// errors are; only the waiting is ours: who does not get it passes the turn on, and tries again when it is
// given back.
#include "locks.h"

#include <errno.h>
#include <pthread.h>

#include "clocks.h"
#include "emit.h"
#include "futex.h"
#include "scheduler.h"

EARSHOT_REAL(pthread_mutex_lock)
EARSHOT_REAL(pthread_mutex_trylock)
EARSHOT_REAL(pthread_mutex_timedlock)
EARSHOT_REAL(pthread_mutex_clocklock)
EARSHOT_REAL(pthread_mutex_unlock)
EARSHOT_REAL(pthread_rwlock_rdlock)
EARSHOT_REAL(pthread_rwlock_wrlock)
EARSHOT_REAL(pthread_rwlock_tryrdlock)
EARSHOT_REAL(pthread_rwlock_trywrlock)
EARSHOT_REAL(pthread_rwlock_timedrdlock)
EARSHOT_REAL(pthread_rwlock_timedwrlock)
EARSHOT_REAL(pthread_rwlock_clockrdlock)
EARSHOT_REAL(pthread_rwlock_clockwrlock)
EARSHOT_REAL(pthread_rwlock_unlock)
EARSHOT_REAL(pthread_spin_lock)
EARSHOT_REAL(pthread_spin_trylock)
EARSHOT_REAL(pthread_spin_unlock)

namespace earshot::recorder {

namespace {

// Whether this thread has locked this mutex of the kind that says so, rather than waiting for itself.
bool is_own_checked_mutex([[maybe_unused]] const pthread_mutex_t* mutex, [[maybe_unused]] const Thread* t) {
#if defined(__GLIBC__)
  return (mutex->__data.__kind & 3) == PTHREAD_MUTEX_ERRORCHECK && mutex->__data.__owner == t->kernel_id;
#else
  return false;
#endif
}

// Tries until it works, fails for good, or the deadline passes.
template <typename Try>
int lock_by_trying(Thread* t, const void* lock, const char* call, std::uint64_t deadline, Try attempt) {
  for (;;) {
    const int error = attempt();
    if (error != EBUSY) return error;
    if (deadline <= run.now) return ETIMEDOUT;
    if (wait_for(t, lock, call, deadline) == Wake::by_time) {
      const int last_error = attempt();
      return last_error == EBUSY ? ETIMEDOUT : last_error;
    }
  }
}

}  // namespace

int lock_mutex(Thread* t, pthread_mutex_t* mutex, const char* call, std::uint64_t deadline) {
  return lock_by_trying(t, mutex, call, deadline, [mutex, t] {
    const int error = real::pthread_mutex_trylock(mutex);
    return error == EBUSY && is_own_checked_mutex(mutex, t) ? EDEADLK : error;
  });
}

int unlock_mutex(pthread_mutex_t* mutex) {
  const int error = real::pthread_mutex_unlock(mutex);
  if (error == 0) wake_waiting(mutex, 1);
  return error;
}

}  // namespace earshot::recorder

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

using RwLock = pthread_rwlock_t;

void arrive(Thread* t) {
  settle(t);
  take_turn(t, 1);
}

int lock_now_or_by(Thread* t, pthread_mutex_t* mutex, const char* call, std::uint64_t deadline) {
  arrive(t);
  const int error = lock_mutex(t, mutex, call, deadline);
  leaving(t);
  return error;
}

int lock_for_reading(Thread* t, RwLock* lock, const char* call, std::uint64_t deadline) {
  arrive(t);
  const int error =
      lock_by_trying(t, lock, call, deadline, [lock] { return real::pthread_rwlock_tryrdlock(lock); });
  leaving(t);
  return error;
}

int lock_for_writing(Thread* t, RwLock* lock, const char* call, std::uint64_t deadline) {
  arrive(t);
  const int error =
      lock_by_trying(t, lock, call, deadline, [lock] { return real::pthread_rwlock_trywrlock(lock); });
  leaving(t);
  return error;
}

// Makes a try, or gives something back, with the turn possibly passed on before it.
template <typename Call>
int at_once(Thread* t, Call call) {
  arrive(t);
  const int error = call();
  leaving(t);
  return error;
}

}  // namespace

EARSHOT_TAKES(int, pthread_mutex_lock, pthread_mutex_t* mutex) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_mutex_lock(mutex);
  return lock_now_or_by(t, mutex, "pthread_mutex_lock", no_deadline);
}
EARSHOT_TAKES(int, pthread_mutex_trylock, pthread_mutex_t* mutex) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_mutex_trylock(mutex);
  return at_once(t, [mutex] { return real::pthread_mutex_trylock(mutex); });
}
EARSHOT_TAKES(int, pthread_mutex_timedlock, pthread_mutex_t* mutex, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_mutex_timedlock(mutex, until);
  return lock_now_or_by(t, mutex, "pthread_mutex_timedlock", deadline_at(CLOCK_REALTIME, *until));
}
EARSHOT_TAKES(int, pthread_mutex_clocklock, pthread_mutex_t* mutex, clockid_t clock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_mutex_clocklock(mutex, clock, until);
  return lock_now_or_by(t, mutex, "pthread_mutex_clocklock", deadline_at(clock, *until));
}
EARSHOT_TAKES(int, pthread_mutex_unlock, pthread_mutex_t* mutex) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_mutex_unlock(mutex);
  return at_once(t, [mutex] { return unlock_mutex(mutex); });
}

EARSHOT_TAKES(int, pthread_rwlock_rdlock, RwLock* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_rwlock_rdlock(lock);
  return lock_for_reading(t, lock, "pthread_rwlock_rdlock", no_deadline);
}
EARSHOT_TAKES(int, pthread_rwlock_wrlock, RwLock* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_rwlock_wrlock(lock);
  return lock_for_writing(t, lock, "pthread_rwlock_wrlock", no_deadline);
}
EARSHOT_TAKES(int, pthread_rwlock_tryrdlock, RwLock* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_rwlock_tryrdlock(lock);
  return at_once(t, [lock] { return real::pthread_rwlock_tryrdlock(lock); });
}
EARSHOT_TAKES(int, pthread_rwlock_trywrlock, RwLock* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_rwlock_trywrlock(lock);
  return at_once(t, [lock] { return real::pthread_rwlock_trywrlock(lock); });
}
EARSHOT_TAKES(int, pthread_rwlock_timedrdlock, RwLock* lock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_rwlock_timedrdlock(lock, until);
  return lock_for_reading(t, lock, "pthread_rwlock_timedrdlock", deadline_at(CLOCK_REALTIME, *until));
}
EARSHOT_TAKES(int, pthread_rwlock_timedwrlock, RwLock* lock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_rwlock_timedwrlock(lock, until);
  return lock_for_writing(t, lock, "pthread_rwlock_timedwrlock", deadline_at(CLOCK_REALTIME, *until));
}
EARSHOT_TAKES(int, pthread_rwlock_clockrdlock, RwLock* lock, clockid_t clock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_rwlock_clockrdlock(lock, clock, until);
  return lock_for_reading(t, lock, "pthread_rwlock_clockrdlock", deadline_at(clock, *until));
}
EARSHOT_TAKES(int, pthread_rwlock_clockwrlock, RwLock* lock, clockid_t clock, const timespec* until) {
  Thread* t = is_valid(*until) ? modelling() : nullptr;
  if (t == nullptr) return real::pthread_rwlock_clockwrlock(lock, clock, until);
  return lock_for_writing(t, lock, "pthread_rwlock_clockwrlock", deadline_at(clock, *until));
}
EARSHOT_TAKES(int, pthread_rwlock_unlock, RwLock* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_rwlock_unlock(lock);
  return at_once(t, [lock] {
    const int error = real::pthread_rwlock_unlock(lock);
    wake_waiting(lock);
    return error;
  });
}

EARSHOT_TAKES(int, pthread_spin_lock, pthread_spinlock_t* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_spin_lock(lock);
  return at_once(t, [t, lock] {
    return lock_by_trying(t, const_cast<const int*>(lock), "pthread_spin_lock", no_deadline,
                          [lock] { return real::pthread_spin_trylock(lock); });
  });
}
EARSHOT_TAKES(int, pthread_spin_trylock, pthread_spinlock_t* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_spin_trylock(lock);
  return at_once(t, [lock] { return real::pthread_spin_trylock(lock); });
}
EARSHOT_TAKES(int, pthread_spin_unlock, pthread_spinlock_t* lock) {
  Thread* t = modelling();
  if (t == nullptr) return real::pthread_spin_unlock(lock);
  return at_once(t, [lock] {
    const int error = real::pthread_spin_unlock(lock);
    wake_waiting(const_cast<const int*>(lock), 1);
    return error;
  });
}

EARSHOT_PART(locks)
