// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The hooks of atomics, which carry out the operation themselves, sequentially consistent whatever order was
// asked for. A read-modify-write is recorded as a read and a write, a compare-exchange that fails as a read;
// the read of what was expected, and the write there upon failure, are the program's and recorded, too.
#include "emit.h"
#include "futex.h"
#include "scheduler.h"

namespace earshot::recorder {

namespace {

using Wide = unsigned __int128;

// Values as accesses of at most 8 bytes.
template <typename T>
void emit_value(const Thread* t, RecordKind kind, const volatile void* where, T value) {
  const void* address = const_cast<const void*>(where);
  if constexpr (sizeof(T) <= 8) {
    emit(t, kind, address, sizeof(T), value);
  } else {
    emit(t, kind, address, 8, static_cast<std::uint64_t>(value));
    emit(t, kind, static_cast<const char*>(address) + 8, 8, static_cast<std::uint64_t>(value >> 64));
  }
}

// Atomically replaces `expected` by `desired`; returns what was there.
template <typename T>
T swap_if(volatile T* a, T expected, T desired) {
  __atomic_compare_exchange_n(a, &expected, desired, false, __ATOMIC_SEQ_CST, __ATOMIC_SEQ_CST);
  return expected;
}

#if defined(__x86_64__)
template <>
Wide swap_if(volatile Wide* a, Wide expected, Wide desired) {
  return __sync_val_compare_and_swap(a, expected, desired);
}
#else
template <>
Wide swap_if(volatile Wide* a, Wide expected, Wide desired) {
  static std::uint32_t lock;
  while (__atomic_exchange_n(&lock, 1, __ATOMIC_ACQUIRE) != 0) system_call(SYS_sched_yield);
  const Wide found = *a;
  if (found == expected) *a = desired;
  __atomic_store_n(&lock, 0, __ATOMIC_RELEASE);
  return found;
}
#endif

template <typename T>
T load_now(const volatile T* a) {
  if constexpr (sizeof(T) <= 8) {
    return __atomic_load_n(a, __ATOMIC_SEQ_CST);
  } else {
    return swap_if(const_cast<volatile T*>(a), T{0}, T{0});
  }
}

// Replaces the value there by change(value); returns what was there.
template <typename T, typename Change>
T change_now(volatile T* a, Change change) {
  T seen = load_now(a);
  for (;;) {
    const T found = swap_if(a, seen, change(seen));
    if (found == seen) return seen;
    seen = found;
  }
}

Thread* entering_atomic(std::uint64_t accesses) {
  Thread* t = entering();
  if (t == nullptr || !run.one_at_a_time) return t;
  settle(t);
  take_turn(t, accesses);
  return t;
}

template <typename T>
T load(const volatile T* a) {
  Thread* t = entering_atomic(1);
  const T value = load_now(a);
  if (t == nullptr) return value;
  emit_value(t, RecordKind::read, a, value);
  leaving(t);
  return value;
}

template <typename T>
void store(volatile T* a, T value) {
  Thread* t = entering_atomic(1);
  change_now(a, [value](T) { return value; });
  if (t == nullptr) return;
  emit_value(t, RecordKind::write, a, value);
  leaving(t);
}

template <typename T, typename Change>
T read_modify_write(volatile T* a, Change change) {
  Thread* t = entering_atomic(2);
  const T found = change_now(a, change);
  if (t == nullptr) return found;
  emit_value(t, RecordKind::read, a, found);
  emit_value(t, RecordKind::write, a, change(found));
  leaving(t);
  return found;
}

template <typename T>
T compare_exchange_value(volatile T* a, T expected, T desired) {
  Thread* t = entering_atomic(2);
  const T found = swap_if(a, expected, desired);
  if (t == nullptr) return found;
  emit_value(t, RecordKind::read, a, found);
  if (found == expected) emit_value(t, RecordKind::write, a, desired);
  leaving(t);
  return found;
}

template <typename T>
int compare_exchange(volatile T* a, T* expected, T desired) {
  Thread* t = entering_atomic(3);
  const T wanted = *expected;
  const T found = swap_if(a, wanted, desired);
  const bool done = found == wanted;
  if (!done) *expected = found;
  if (t == nullptr) return done;
  emit_value(t, RecordKind::read, expected, wanted);
  emit_value(t, RecordKind::read, a, found);
  if (done) {
    emit_value(t, RecordKind::write, a, desired);
  } else {
    emit_value(t, RecordKind::write, expected, found);
  }
  leaving(t);
  return done;
}

}  // namespace
}  // namespace earshot::recorder

namespace recorder = earshot::recorder;

#define EARSHOT_ATOMIC extern "C" __attribute__((visibility("default")))

#define EARSHOT_FETCH(bits, T, name, expression)                                   \
  EARSHOT_ATOMIC T __tsan_atomic##bits##_##name(volatile T* a, T v, int) {         \
    return recorder::read_modify_write(a, [v](T old) -> T { return expression; }); \
  }

#define EARSHOT_ATOMICS(bits, T)                                                                          \
  EARSHOT_ATOMIC T __tsan_atomic##bits##_load(const volatile T* a, int) {                                 \
    return recorder::load(a);                                                                             \
  }                                                                                                       \
  EARSHOT_ATOMIC void __tsan_atomic##bits##_store(volatile T* a, T v, int) {                              \
    recorder::store(a, v);                                                                                \
  }                                                                                                       \
  EARSHOT_FETCH(bits, T, exchange, (static_cast<void>(old), v))                                           \
  EARSHOT_FETCH(bits, T, fetch_add, static_cast<T>(old + v))                                              \
  EARSHOT_FETCH(bits, T, fetch_sub, static_cast<T>(old - v))                                              \
  EARSHOT_FETCH(bits, T, fetch_and, static_cast<T>(old & v))                                              \
  EARSHOT_FETCH(bits, T, fetch_or, static_cast<T>(old | v))                                               \
  EARSHOT_FETCH(bits, T, fetch_xor, static_cast<T>(old ^ v))                                              \
  EARSHOT_FETCH(bits, T, fetch_nand, static_cast<T>(~(old & v)))                                          \
  EARSHOT_ATOMIC int __tsan_atomic##bits##_compare_exchange_strong(volatile T* a, T* expected, T v, int,  \
                                                                   int) {                                 \
    return recorder::compare_exchange(a, expected, v);                                                    \
  }                                                                                                       \
  EARSHOT_ATOMIC int __tsan_atomic##bits##_compare_exchange_weak(volatile T* a, T* expected, T v, int,    \
                                                                 int) {                                   \
    return recorder::compare_exchange(a, expected, v);                                                    \
  }                                                                                                       \
  EARSHOT_ATOMIC T __tsan_atomic##bits##_compare_exchange_val(volatile T* a, T expected, T v, int, int) { \
    return recorder::compare_exchange_value(a, expected, v);                                              \
  }
EARSHOT_ATOMICS(8, unsigned char)
EARSHOT_ATOMICS(16, unsigned short)
EARSHOT_ATOMICS(32, unsigned int)
EARSHOT_ATOMICS(64, unsigned long)
EARSHOT_ATOMICS(128, unsigned __int128)
#undef EARSHOT_ATOMICS

EARSHOT_ATOMIC void __tsan_atomic_thread_fence(int) {
  __atomic_thread_fence(__ATOMIC_SEQ_CST);
}
EARSHOT_ATOMIC void __tsan_atomic_signal_fence(int) {
  __atomic_signal_fence(__ATOMIC_SEQ_CST);
}

EARSHOT_PART(atomics)
