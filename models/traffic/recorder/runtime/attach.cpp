// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The beginning of a run: finds the recorder's shared memory, if the program was started by `earshot record`,
// and makes the first thread known.
#include <dlfcn.h>
#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#include "emit.h"
#include "futex.h"
#include "message.h"
#include "scheduler.h"
#include "threads.h"

extern "C" const char earshot_part_threads, earshot_part_locks, earshot_part_waits, earshot_part_clocks,
    earshot_part_c11, earshot_part_futex_calls, earshot_part_memory, earshot_part_outside, earshot_part_hooks,
    earshot_part_atomics, earshot_part_blocks, earshot_part_once;

namespace earshot::recorder {

Run run;
__thread Thread* self __attribute__((tls_model("initial-exec")));

namespace {

__attribute__((used)) const char* const all_parts[] = {
    &earshot_part_threads, &earshot_part_locks,       &earshot_part_waits,  &earshot_part_clocks,
    &earshot_part_c11,     &earshot_part_futex_calls, &earshot_part_memory, &earshot_part_outside,
    &earshot_part_hooks,   &earshot_part_atomics,     &earshot_part_blocks, &earshot_part_once};

void say(const char* text) {
  Message message;
  message.add("earshot recorder: ").add(text).add("\n");
  system_call(SYS_write, 2, reinterpret_cast<long>(message.text()), static_cast<long>(message.size()));
}

RingHeader* map_ring(const char* descriptor_text) {
  const int descriptor = atoi(descriptor_text);
  void* mapped = mmap(nullptr, ring_bytes, PROT_READ | PROT_WRITE, MAP_SHARED, descriptor, 0);
  close(descriptor);
  if (mapped == MAP_FAILED) return nullptr;
  auto* ring = static_cast<RingHeader*>(mapped);
  if (ring->magic != ring_magic || ring->version != ring_version) {
    say("this program was linked with another version of the library than `earshot record` has; not "
        "recording.");
    munmap(mapped, ring_bytes);
    return nullptr;
  }
  std::uint32_t nobody = 0;
  if (!__atomic_compare_exchange_n(&ring->attached, &nobody, static_cast<std::uint32_t>(getpid()), false,
                                   __ATOMIC_SEQ_CST, __ATOMIC_SEQ_CST)) {
    munmap(mapped, ring_bytes);  // a program of the recorded program
    return nullptr;
  }
  return ring;
}

// A forked child runs on its own: the ring and the other threads stay with the parent.
void in_child() {
  self = nullptr;
  run.one_at_a_time = false;
  run.ring = nullptr;
}

// Scrambles the seed so that neighbouring seeds begin differently; Steele, Lea and Flood 2014, SplitMix64.
std::uint64_t scrambled(std::uint64_t seed) {
  seed += 0x9E3779B97F4A7C15ULL;
  seed = (seed ^ (seed >> 30)) * 0xBF58476D1CE4E5B9ULL;
  seed = (seed ^ (seed >> 27)) * 0x94D049BB133111EBULL;
  seed ^= seed >> 31;
  return seed != 0 ? seed : 1;
}

}  // namespace

void attach() {
  static bool done;
  if (done) return;
  done = true;
  const char* descriptor = getenv(ring_variable);
  if (descriptor == nullptr) return;
  RingHeader* ring = map_ring(descriptor);
  unsetenv(ring_variable);
  if (ring == nullptr) return;
  run.ring = ring;
  run.random = scrambled(ring->seed);
  Thread* t = new_thread();
  t->state = State::running;
  t->share = ring->hand_over;
  t->handle = pthread_self();
  t->has_handle = true;
  t->kernel_id = getpid();
  watch_for_thread_ends();
  run.one_at_a_time = ring->free_running == 0;
  pthread_atfork(nullptr, nullptr, in_child);
  t->inside = false;
  self = t;
}

// As early as a constructor may run.
__attribute__((constructor(101))) static void attach_first() {
  attach();
}

// The last write before the end of the program. Hooks go on working after this one.
__attribute__((destructor(101))) static void settle_last() {
  if (Thread* t = modelling()) {
    settle(t);
    leaving(t);
  }
}

void* real_function(const char* name) {
  // The condition variables of version 2.2.5 are other functions under the same names.
  void* found = nullptr;
  if (strncmp(name, "pthread_cond_", 13) == 0) found = dlvsym(RTLD_NEXT, name, "GLIBC_2.3.2");
  if (found == nullptr) found = dlsym(RTLD_NEXT, name);
  if (found == nullptr) {
    Message message;
    message.add("the C library has no function ").add(name).add(", which the program calls.");
    say(message.text());
    abort();
  }
  return found;
}

long system_call(long number, long a, long b, long c, long d, long e, long f) {
#if defined(__x86_64__)
  long result;
  register long r10 __asm__("r10") = d;
  register long r8 __asm__("r8") = e;
  register long r9 __asm__("r9") = f;
  __asm__ volatile("syscall"
                   : "=a"(result)
                   : "a"(number), "D"(a), "S"(b), "d"(c), "r"(r10), "r"(r8), "r"(r9)
                   : "rcx", "r11", "memory");
  return result;
#elif defined(__aarch64__)
  register long x8 __asm__("x8") = number;
  register long x0 __asm__("x0") = a;
  register long x1 __asm__("x1") = b;
  register long x2 __asm__("x2") = c;
  register long x3 __asm__("x3") = d;
  register long x4 __asm__("x4") = e;
  register long x5 __asm__("x5") = f;
  __asm__ volatile("svc 0" : "+r"(x0) : "r"(x8), "r"(x1), "r"(x2), "r"(x3), "r"(x4), "r"(x5) : "memory");
  return x0;
#else
#error "The recorder's runtime knows the system calls of x86-64 and AArch64 only."
#endif
}

}  // namespace earshot::recorder
