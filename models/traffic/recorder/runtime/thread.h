// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the runtime knows of each thread of the recorded program, and of the run as a whole.
//
// Every entry into the runtime, hook or interposed function, begins with `entering()`. It answers null when
// there is nothing to do: the program runs on its own, the thread is not ours, or a signal handler
// interrupted the runtime itself.
#pragma once

#include <pthread.h>
#include <sys/types.h>

#include <cstddef>
#include <cstdint>

#include "earshot/traffic/recorder/shared_ring.h"

namespace earshot::recorder {

enum class State : std::uint8_t {
  unused,
  running,   // has the turn
  runnable,  // waits for its turn
  blocked,   // waits for another thread, or for a time
  outside,   // in a system call that may take long; needs a turn when it returns
};

enum class Wake : std::uint8_t { by_thread, by_time, by_cancellation };

// A write that the program announced and had not yet made when the hook returned.
struct PendingWrite {
  const void* address;
  std::size_t size;      // 0: none
  std::uint64_t before;  // the bytes there when it was announced, if size is at most 8
  bool copying;          // the second half of a structure copy, whose read has been recorded
};

constexpr std::uint64_t no_deadline = ~std::uint64_t{0};

struct Thread {
  std::uint8_t number;  // the initiator in the recording
  State state;
  bool inside;           // the runtime is at work for this thread
  std::uint32_t pinned;  // more than 0: keeps its turn when its share is used up
  std::uint64_t share;   // accesses left until it hands over
  PendingWrite pending;

  std::uint32_t go;        // futex: 1 when the turn is this thread's
  const void* waits_for;   // blocked: on what
  const char* waits_in;    // blocked: in which call
  std::uint64_t deadline;  // blocked: virtual nanoseconds
  std::uint64_t since;     // blocked: who waits longest is woken first
  Wake wake;
  bool cancelled;

  pthread_t handle;
  bool has_handle;
  pid_t kernel_id;
  pid_t leaving;  // a thread that must be gone before this one goes on
  void* (*start)(void*);
  void* argument;
};

// The run. `ring` is null when the program was not started by `earshot record`.
struct Run {
  RingHeader* ring;
  bool one_at_a_time;
  std::uint64_t random;            // state of the generator that chooses who is next, and for how long
  std::uint64_t now;               // virtual nanoseconds since the start: one for each access
  std::uint64_t sequence;          // counts waits
  std::uint32_t lock;              // guards the states of threads; see scheduler.cpp
  std::uint32_t someone_returned;  // futex: changes when a thread comes back from outside
  bool turn_is_free;
  pthread_key_t leaving_key;
  Thread threads[most_threads];
};

extern Run run;
extern __thread Thread* self __attribute__((tls_model("initial-exec")));

// Finds the recorder, once. Called by the first constructor that runs.
void attach();

inline Thread* entering() {
  Thread* t = self;
  if (t == nullptr || t->inside) return nullptr;
  t->inside = true;
  __atomic_signal_fence(__ATOMIC_SEQ_CST);
  return t;
}

inline void leaving(Thread* t) {
  __atomic_signal_fence(__ATOMIC_SEQ_CST);
  t->inside = false;
}

// The same for what is modelled one at a time, and left to the C library when threads run freely.
inline Thread* modelling() {
  return run.one_at_a_time ? entering() : nullptr;
}

// The function that the program would have got without us, found once.
void* real_function(const char* name);

// At global scope: defines real::NAME, the function as declared by the C library's header.
#define EARSHOT_REAL(name)                                              \
  namespace real {                                                      \
  template <typename... Arguments>                                      \
  inline auto name(Arguments... arguments) {                            \
    static void* found;                                                 \
    void* function = __atomic_load_n(&found, __ATOMIC_RELAXED);         \
    if (function == nullptr) {                                          \
      function = earshot::recorder::real_function(#name);               \
      __atomic_store_n(&found, function, __ATOMIC_RELAXED);             \
    }                                                                   \
    return reinterpret_cast<decltype(&::name)>(function)(arguments...); \
  }                                                                     \
  }

// At global scope, before a body: defines a function that takes the place of the C library's NAME. It has
// another name in C++, so that it need not repeat the exception specification, which some headers give and
// others do not.
#define EARSHOT_TAKES(Result, name, ...)                                                               \
  extern "C" Result earshot_##name(__VA_ARGS__) __asm__(#name) __attribute__((visibility("default"))); \
  Result earshot_##name(__VA_ARGS__)

// At global scope: gives a file of the runtime a name that attach.cpp asks for. The linker would otherwise
// leave out of a static library what only a shared library calls, such as pthread_create() for the C++
// library.
#define EARSHOT_PART(name)                   \
  extern "C" const char earshot_part_##name; \
  extern "C" const char earshot_part_##name = 0;

}  // namespace earshot::recorder
