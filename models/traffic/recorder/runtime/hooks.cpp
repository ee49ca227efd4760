// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The hooks that gcc 12 and clang 14 call under -fsanitize=thread, but for those of atomics.
//
// A hook is called before its access. So the value of a read can be taken from memory in the hook itself;
// that of a write is there at the thread's next hook, and nobody else may run in between. gcc announces a
// structure copy by the hook of the write, then that of the read, and then copies: such a read must not take
// the write for made.
#include "emit.h"
#include "scheduler.h"

namespace earshot::recorder {

namespace {

// Whether the pending write may be the first half of a structure copy that this read is the second half of.
// If the bytes have changed, the write has been made; if they are what the copy would bring, it makes no
// difference.
bool is_copied_from(const PendingWrite& write, const void* address, std::size_t size) {
  if (write.size != size || write.copying) return false;
  const char* to = static_cast<const char*>(write.address);
  const char* from = static_cast<const char*>(address);
  if (to < from + size && from < to + size) return false;
  if (size > 8) return true;
  const std::uint64_t now = value_at(to, size);
  return now == write.before && now != value_at(from, size);
}

void announce(Thread* t, const void* address, std::size_t size) {
  t->pending.address = address;
  t->pending.size = size;
  t->pending.copying = false;
  if (size <= 8) t->pending.before = value_at(address, size);
}

void read_ahead(const void* address, std::size_t size) {
  Thread* t = entering();
  if (t == nullptr) return;
  if (!run.one_at_a_time) {
    emit_from_memory(t, RecordKind::read, address, size);
  } else if (t->pending.size != 0 && is_copied_from(t->pending, address, size)) {
    t->pending.copying = true;
    emit_from_memory(t, RecordKind::read, address, size);
  } else {
    settle(t);
    take_turn(t, size <= 8 ? 1 : (size + 7) / 8);
    emit_from_memory(t, RecordKind::read, address, size);
  }
  leaving(t);
}

void write_ahead(const void* address, std::size_t size) {
  Thread* t = entering();
  if (t == nullptr) return;
  if (run.one_at_a_time) {
    settle(t);
    take_turn(t, size <= 8 ? 1 : (size + 7) / 8);
    announce(t, address, size);
  } else {
    emit_from_memory(t, RecordKind::write, address, size);
  }
  leaving(t);
}

// A read and the write that follows it, announced together.
void update_ahead(void* address, std::size_t size) {
  Thread* t = entering();
  if (t == nullptr) return;
  if (run.one_at_a_time) {
    settle(t);
    take_turn(t, size <= 8 ? 2 : (size + 7) / 8 * 2);
    emit_from_memory(t, RecordKind::read, address, size);
    announce(t, address, size);
  } else {
    emit_from_memory(t, RecordKind::read, address, size);
    emit_from_memory(t, RecordKind::write, address, size);
  }
  leaving(t);
}

void function_boundary() {
  Thread* t = self;
  if (t == nullptr || t->pending.size == 0) return;
  t = entering();
  if (t == nullptr) return;
  settle(t);
  leaving(t);
}

}  // namespace
}  // namespace earshot::recorder

using earshot::recorder::read_ahead;
using earshot::recorder::update_ahead;
using earshot::recorder::write_ahead;

#define EARSHOT_HOOK extern "C" __attribute__((visibility("default"))) void

#define EARSHOT_HOOKS_OF_SIZE(size)                                   \
  EARSHOT_HOOK __tsan_read##size(void* address) {                     \
    read_ahead(address, size);                                        \
  }                                                                   \
  EARSHOT_HOOK __tsan_write##size(void* address) {                    \
    write_ahead(address, size);                                       \
  }                                                                   \
  EARSHOT_HOOK __tsan_read##size##_pc(void* address, void*) {         \
    read_ahead(address, size);                                        \
  }                                                                   \
  EARSHOT_HOOK __tsan_write##size##_pc(void* address, void*) {        \
    write_ahead(address, size);                                       \
  }                                                                   \
  EARSHOT_HOOK __tsan_volatile_read##size(void* address) {            \
    read_ahead(address, size);                                        \
  }                                                                   \
  EARSHOT_HOOK __tsan_volatile_write##size(void* address) {           \
    write_ahead(address, size);                                       \
  }                                                                   \
  EARSHOT_HOOK __tsan_unaligned_read##size(void* address) {           \
    read_ahead(address, size);                                        \
  }                                                                   \
  EARSHOT_HOOK __tsan_unaligned_write##size(void* address) {          \
    write_ahead(address, size);                                       \
  }                                                                   \
  EARSHOT_HOOK __tsan_unaligned_volatile_read##size(void* address) {  \
    read_ahead(address, size);                                        \
  }                                                                   \
  EARSHOT_HOOK __tsan_unaligned_volatile_write##size(void* address) { \
    write_ahead(address, size);                                       \
  }                                                                   \
  EARSHOT_HOOK __tsan_read_write##size(void* address) {               \
    update_ahead(address, size);                                      \
  }                                                                   \
  EARSHOT_HOOK __tsan_unaligned_read_write##size(void* address) {     \
    update_ahead(address, size);                                      \
  }
EARSHOT_HOOKS_OF_SIZE(1)
EARSHOT_HOOKS_OF_SIZE(2)
EARSHOT_HOOKS_OF_SIZE(4)
EARSHOT_HOOKS_OF_SIZE(8)
EARSHOT_HOOKS_OF_SIZE(16)
#undef EARSHOT_HOOKS_OF_SIZE

EARSHOT_HOOK __tsan_read_range(void* address, unsigned long size) {
  read_ahead(address, size);
}
EARSHOT_HOOK __tsan_write_range(void* address, unsigned long size) {
  write_ahead(address, size);
}
EARSHOT_HOOK __tsan_read_range_pc(void* address, unsigned long size, void*) {
  read_ahead(address, size);
}
EARSHOT_HOOK __tsan_write_range_pc(void* address, unsigned long size, void*) {
  write_ahead(address, size);
}
EARSHOT_HOOK __tsan_vptr_update(void** address, void*) {
  write_ahead(address, sizeof *address);
}
EARSHOT_HOOK __tsan_vptr_read(void** address) {
  read_ahead(address, sizeof *address);
}

EARSHOT_HOOK __tsan_init() {
  earshot::recorder::attach();
}
EARSHOT_HOOK __tsan_func_entry(void*) {
  earshot::recorder::function_boundary();
}
EARSHOT_HOOK __tsan_func_exit(void*) {
  earshot::recorder::function_boundary();
}
EARSHOT_HOOK __tsan_ignore_thread_begin() {}
EARSHOT_HOOK __tsan_ignore_thread_end() {}

EARSHOT_PART(hooks)
