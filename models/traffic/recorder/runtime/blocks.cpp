// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// memcpy, memmove and memset of the program's own code, which the linker's --wrap option sends here, and the
// names that newer clangs call instead. Recorded as a loop would make them: 64 bytes are read, then written.
#include "emit.h"
#include "scheduler.h"

// The functions themselves if the program was linked with --wrap; null if not, and then nothing leads here
// but calls of the __tsan_ names.
extern "C" void* __real_memmove(void*, const void*, size_t) __attribute__((weak));
extern "C" void* __real_memset(void*, int, size_t) __attribute__((weak));

namespace earshot::recorder {

namespace {

constexpr std::size_t chunk = 64;

void move(void* to, const void* from, std::size_t size) {
  if (__real_memmove != nullptr) {
    __real_memmove(to, from, size);
  } else {
    __builtin_memmove(to, from, size);
  }
}

void fill(void* to, int byte, std::size_t size) {
  if (__real_memset != nullptr) {
    __real_memset(to, byte, size);
  } else {
    __builtin_memset(to, byte, size);
  }
}

void do_turn(Thread* t, std::size_t bytes, std::size_t accesses_per_8) {
  if (run.one_at_a_time) take_turn(t, (bytes + 7) / 8 * accesses_per_8);
}

void move_chunk(Thread* t, char* to, const char* from, std::size_t size) {
  do_turn(t, size, 2);
  emit_from_memory(t, RecordKind::read, from, size);
  move(to, from, size);
  emit_from_memory(t, RecordKind::write, to, size);
}

void move_forwards(Thread* t, char* to, const char* from, std::size_t size) {
  for (std::size_t at = 0; at < size; at += chunk) {
    move_chunk(t, to + at, from + at, size - at < chunk ? size - at : chunk);
  }
}

void move_backwards(Thread* t, char* to, const char* from, std::size_t size) {
  while (size > 0) {
    const std::size_t part = size < chunk ? size : chunk;
    size -= part;
    move_chunk(t, to + size, from + size, part);
  }
}

Thread* entering_block() {
  Thread* t = entering();
  if (t != nullptr && run.one_at_a_time) settle(t);
  return t;
}

void* moved(void* to, const void* from, std::size_t size) {
  Thread* t = entering_block();
  if (t == nullptr) {
    move(to, from, size);
    return to;
  }
  auto* target = static_cast<char*>(to);
  const auto* source = static_cast<const char*>(from);
  if (target > source && target < source + size) {
    move_backwards(t, target, source, size);
  } else {
    move_forwards(t, target, source, size);
  }
  leaving(t);
  return to;
}

void* filled(void* to, int byte, std::size_t size) {
  Thread* t = entering_block();
  if (t == nullptr) {
    fill(to, byte, size);
    return to;
  }
  auto* target = static_cast<char*>(to);
  for (std::size_t at = 0; at < size; at += chunk) {
    const std::size_t part = size - at < chunk ? size - at : chunk;
    do_turn(t, part, 1);
    fill(target + at, byte, part);
    emit_from_memory(t, RecordKind::write, target + at, part);
  }
  leaving(t);
  return to;
}

}  // namespace
}  // namespace earshot::recorder

using earshot::recorder::filled;
using earshot::recorder::moved;

#define EARSHOT_BLOCK extern "C" __attribute__((visibility("default"))) void*

EARSHOT_BLOCK __wrap_memcpy(void* to, const void* from, size_t size) {
  return moved(to, from, size);
}
EARSHOT_BLOCK __wrap_memmove(void* to, const void* from, size_t size) {
  return moved(to, from, size);
}
EARSHOT_BLOCK __wrap_memset(void* to, int byte, size_t size) {
  return filled(to, byte, size);
}
EARSHOT_BLOCK __wrap___memcpy_chk(void* to, const void* from, size_t size, size_t room) {
  if (size > room) __builtin_trap();
  return moved(to, from, size);
}
EARSHOT_BLOCK __wrap___memmove_chk(void* to, const void* from, size_t size, size_t room) {
  if (size > room) __builtin_trap();
  return moved(to, from, size);
}
EARSHOT_BLOCK __wrap___memset_chk(void* to, int byte, size_t size, size_t room) {
  if (size > room) __builtin_trap();
  return filled(to, byte, size);
}
EARSHOT_BLOCK __tsan_memcpy(void* to, const void* from, size_t size) {
  return moved(to, from, size);
}
EARSHOT_BLOCK __tsan_memmove(void* to, const void* from, size_t size) {
  return moved(to, from, size);
}
EARSHOT_BLOCK __tsan_memset(void* to, int byte, size_t size) {
  return filled(to, byte, size);
}

EARSHOT_PART(blocks)
