// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// One at a time: exactly one thread of the program has the turn, and passes it on inside a hook when its
// share of accesses is used up, or because it must wait. Who is next, and for how long, comes from the seed
// alone. Time is virtual: it advances by one nanosecond for each access and jumps when every thread waits for
// a time, so sleeps and timed waits end in the same order in every run.
//
// All functions here are called one at a time, by the thread that has the turn, with `inside` set, except
// where said otherwise.
#pragma once

#include "thread.h"

namespace earshot::recorder {

// Accounts for `accesses` made now; may hand the turn over and come back later. The pending write must be
// settled.
void take_turn(Thread* t, std::uint64_t accesses);

// Hands the turn over now, if another thread can run.
void hand_over(Thread* t);

// Waits until woken on `key`, the deadline, or cancellation. `call` names the waiting for a deadlock's
// message.
Wake wait_for(Thread* t, const void* key, const char* call, std::uint64_t deadline = no_deadline);

// Lets up to `how_many` threads that wait on `key` run again, longest waiting first. Returns how many.
int wake_waiting(const void* key, int how_many = static_cast<int>(most_threads));

// Ends the thread's wait, if it waits, and makes it find that it was cancelled.
void cancel_wait(Thread* t);

// Around a system call that may take long: others run meanwhile.
void go_outside(Thread* t, const char* call);
void come_back(Thread* t);

// A thread to be: takes a number and is runnable. Ends the program if there are too many.
Thread* new_thread();
// Takes back what new_thread() gave, if the thread could not be started.
void forget_thread(Thread* t);
// Called first by a new thread, which does not have the turn: returns when it has.
void first_turn(Thread* t);
// The calling thread is about to end: passes the turn on for good.
void last_turn(Thread* t);

// The thread alive with this handle, or null.
Thread* find_thread(pthread_t handle);

// Ends the program with a message for a person, which the recorder repeats.
[[noreturn]] void give_up(RingVerdict verdict, const char* message);

}  // namespace earshot::recorder
