// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The lock guards the threads' states because a thread that comes back from outside has no turn yet. It is
// held for a few instructions only, and nearly always free.
#include "scheduler.h"

#include <string.h>
#include <unistd.h>

#include "futex.h"
#include "message.h"

namespace earshot::recorder {

namespace {

constexpr int exit_status_given_up = 70;  // EX_SOFTWARE of sysexits.h

void lock_states() {
  while (__atomic_exchange_n(&run.lock, 1, __ATOMIC_ACQUIRE) != 0) system_call(SYS_sched_yield);
}
void unlock_states() {
  __atomic_store_n(&run.lock, 0, __ATOMIC_RELEASE);
}

// Vigna, "An experimental exploration of Marsaglia's xorshift generators, scrambled" (2016): xorshift64*.
std::uint64_t random_below(std::uint64_t bound) {
  run.random ^= run.random >> 12;
  run.random ^= run.random << 25;
  run.random ^= run.random >> 27;
  return (run.random * 0x2545F4914F6CDD1DULL >> 33) % bound;
}

// Uniform from 1 to 2 * mean - 1.
std::uint64_t new_share() {
  return 1 + random_below(2 * std::uint64_t{run.ring->hand_over} - 1);
}

std::uint64_t earliest_deadline() {
  std::uint64_t earliest = no_deadline;
  for (const Thread& t : run.threads) {
    if (t.state == State::blocked && t.deadline < earliest) earliest = t.deadline;
  }
  return earliest;
}

void wake_due() {
  for (Thread& t : run.threads) {
    if (t.state != State::blocked || t.deadline > run.now) continue;
    t.state = State::runnable;
    t.wake = Wake::by_time;
  }
}

unsigned count(State state) {
  unsigned n = 0;
  for (const Thread& t : run.threads) n += t.state == state ? 1u : 0u;
  return n;
}

// One of the runnable threads, each as likely as the others; null if there is none.
Thread* any_runnable() {
  const unsigned n = count(State::runnable);
  if (n == 0) return nullptr;
  std::uint64_t skip = random_below(n);
  for (Thread& t : run.threads) {
    if (t.state == State::runnable && skip-- == 0) return &t;
  }
  return nullptr;
}

void say_deadlock() {
  Message message;
  message.add("the program waits for ever: every thread waits for another.");
  for (const Thread& t : run.threads) {
    if (t.state != State::blocked) continue;
    message.add("\n  thread ")
        .add_number(t.number)
        .add(" in ")
        .add(t.waits_in)
        .add(" on ")
        .add_address(t.waits_for);
  }
  unlock_states();
  give_up(RingVerdict::deadlock, message.text());
}

// Whom to give the turn to when `leaver` has given it up; called with the lock. If only times are waited for,
// time jumps. But while a thread is outside, others' sleeps take their real time, since what it brings back
// may be what they wait for: the caller then waits here. Null: nobody can run (for `dispatch` false, before
// any time is due).
Thread* next_thread(bool dispatch) {
  for (;;) {
    wake_due();
    if (Thread* t = any_runnable()) return t;
    const bool some_outside = count(State::outside) > 0;
    const std::uint64_t due = earliest_deadline();
    if (due == no_deadline) {
      if (!some_outside && count(State::blocked) > 0) say_deadlock();
      return nullptr;
    }
    if (!some_outside) {
      run.now = due;
      continue;
    }
    if (!dispatch) return nullptr;
    const std::uint32_t seen = run.someone_returned;
    const std::uint64_t pause = due - run.now;
    unlock_states();
    futex_wait(&run.someone_returned, seen, static_cast<std::int64_t>(pause));
    lock_states();
    if (seen == run.someone_returned) run.now = due;
  }
}

// What a waiting thread finds in its `go`.
constexpr std::uint32_t go_on = 1;
constexpr std::uint32_t go_watch_the_clock = 2;  // nobody can run before a time is due: see next_thread()

void tell(Thread* t, std::uint32_t what) {
  run.turn_is_free = false;
  __atomic_store_n(&t->go, what, __ATOMIC_RELEASE);
  futex_wake(&t->go, 1);
}

void give_turn(Thread* t) {
  ++run.ring->hand_overs;
  t->state = State::running;
  tell(t, go_on);
}

void wait_until_gone(pid_t kernel_id) {
  while (system_call(SYS_tgkill, getpid(), kernel_id, 0) == 0) system_call(SYS_sched_yield);
}

std::uint32_t wait_until_told(Thread* t) {
  while (__atomic_load_n(&t->go, __ATOMIC_ACQUIRE) == 0) futex_wait(&t->go, 0);
  const std::uint32_t what = t->go;
  t->go = 0;
  return what;
}

// The thread has the turn again.
void resume(Thread* t) {
  // What a thread does as it ends, such as giving memory back, would race with what this one does.
  if (t->leaving != 0) wait_until_gone(t->leaving);
  t->leaving = 0;
  t->share = new_share();
}

void wait_for_turn(Thread* t) {
  wait_until_told(t);
  resume(t);
}

// Gives the turn to whoever is next, and waits for it to come back. Called with the lock, the state already
// set.
void switch_away(Thread* t) {
  for (;;) {
    Thread* next = next_thread(true);
    if (next == t) {
      t->state = State::running;
      unlock_states();
      break;
    }
    if (next != nullptr) {
      give_turn(next);
    } else {
      run.turn_is_free = true;
    }
    unlock_states();
    if (wait_until_told(t) == go_on) break;
    lock_states();
  }
  resume(t);
}

// Wakes up to `how_many` threads that wait on `key`. Called with the lock.
int wake_locked(const void* key, int how_many) {
  int woken = 0;
  while (woken < how_many) {
    Thread* longest = nullptr;
    for (Thread& t : run.threads) {
      if (t.state != State::blocked || t.waits_for != key) continue;
      if (longest == nullptr || t.since < longest->since) longest = &t;
    }
    if (longest == nullptr) break;
    longest->state = State::runnable;
    longest->wake = Wake::by_thread;
    ++woken;
  }
  return woken;
}

Thread* first_to_be_due() {
  const std::uint64_t due = earliest_deadline();
  if (due == no_deadline) return nullptr;
  for (Thread& t : run.threads) {
    if (t.state == State::blocked && t.deadline == due) return &t;
  }
  return nullptr;
}

}  // namespace

void take_turn(Thread* t, std::uint64_t accesses) {
  run.now += accesses;
  if (t->share > accesses) {
    t->share -= accesses;
    return;
  }
  t->share = 0;
  if (t->pinned == 0) hand_over(t);
}

void hand_over(Thread* t) {
  lock_states();
  wake_due();
  Thread* next = any_runnable();
  if (next == nullptr) {
    unlock_states();
    t->share = new_share();
    return;
  }
  t->state = State::runnable;
  give_turn(next);
  unlock_states();
  wait_for_turn(t);
}

Wake wait_for(Thread* t, const void* key, const char* call, std::uint64_t deadline) {
  lock_states();
  t->waits_for = key;
  t->waits_in = call;
  t->deadline = deadline;
  t->since = ++run.sequence;
  t->state = State::blocked;
  switch_away(t);
  t->waits_for = nullptr;
  return t->wake;
}

int wake_waiting(const void* key, int how_many) {
  lock_states();
  const int woken = wake_locked(key, how_many);
  unlock_states();
  return woken;
}

void cancel_wait(Thread* t) {
  lock_states();
  t->cancelled = true;
  if (t->state == State::blocked) {
    t->state = State::runnable;
    t->wake = Wake::by_cancellation;
  }
  unlock_states();
}

void go_outside(Thread* t, const char* call) {
  lock_states();
  t->waits_in = call;
  t->state = State::outside;
  if (Thread* next = next_thread(false)) {
    give_turn(next);
  } else if (Thread* watcher = first_to_be_due()) {
    tell(watcher, go_watch_the_clock);
  } else {
    run.turn_is_free = true;
  }
  unlock_states();
}

void come_back(Thread* t) {
  lock_states();
  if (run.turn_is_free) {
    run.turn_is_free = false;
    t->state = State::running;
    unlock_states();
    return;
  }
  t->state = State::runnable;
  ++run.someone_returned;
  futex_wake(&run.someone_returned, 1);
  unlock_states();
  wait_for_turn(t);
}

Thread* new_thread() {
  lock_states();
  Thread* t = nullptr;
  for (Thread& candidate : run.threads) {
    if (candidate.state != State::unused) continue;
    t = &candidate;
    break;
  }
  if (t == nullptr) {
    unlock_states();
    give_up(RingVerdict::too_many_threads,
            "the program has more than 64 threads at once, and a recording holds 64 initiators.");
  }
  const auto number = static_cast<std::uint8_t>(t - run.threads);
  memset(static_cast<void*>(t), 0, sizeof *t);
  t->number = number;
  t->inside = true;
  t->state = State::runnable;
  RingHeader* ring = run.ring;
  ++ring->threads_started;
  const unsigned alive = most_threads - count(State::unused);
  if (alive > ring->most_alive) ring->most_alive = alive;
  unlock_states();
  return t;
}

void forget_thread(Thread* t) {
  lock_states();
  t->state = State::unused;
  --run.ring->threads_started;
  unlock_states();
}

void first_turn(Thread* t) {
  wait_for_turn(t);
}

void last_turn(Thread* t) {
  const pid_t kernel_id = t->kernel_id;
  // The first thread of a process stays, as a shadow, until the process ends.
  const bool will_be_gone = kernel_id != getpid();
  lock_states();
  t->state = State::unused;
  wake_locked(t, static_cast<int>(most_threads));
  Thread* next = run.one_at_a_time ? next_thread(true) : nullptr;
  if (next != nullptr) {
    if (will_be_gone) next->leaving = kernel_id;
    give_turn(next);
  } else {
    run.turn_is_free = true;
  }
  unlock_states();
}

Thread* find_thread(pthread_t handle) {
  for (Thread& t : run.threads) {
    if (t.state != State::unused && t.has_handle && pthread_equal(t.handle, handle) != 0) return &t;
  }
  return nullptr;
}

void give_up(RingVerdict verdict, const char* message) {
  run.ring->verdict = verdict;
  strncpy(run.ring->message, message, sizeof run.ring->message - 1);
  system_call(SYS_exit_group, exit_status_given_up);
  __builtin_unreachable();
}

}  // namespace earshot::recorder
