// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "emit.h"

#include <unistd.h>

#include "futex.h"

namespace earshot::recorder {

namespace {

constexpr std::uint64_t bell_every = 4096;  // records; the recorder looks by itself now and then, too

void ring_the_bell(RingHeader* ring) {
  __atomic_fetch_add(&ring->bell, 1, __ATOMIC_RELEASE);
  futex_wake(&ring->bell, 1);
}

// Waits until position `mine` has a free slot. Gives up recording, not running, if the recorder is gone.
bool wait_for_room(RingHeader* ring, std::uint64_t mine) {
  while (mine - __atomic_load_n(&ring->head, __ATOMIC_ACQUIRE) >= ring_records) {
    const std::uint32_t seen = __atomic_load_n(&ring->room, __ATOMIC_ACQUIRE);
    __atomic_store_n(&ring->program_waits, 1, __ATOMIC_SEQ_CST);
    if (mine - __atomic_load_n(&ring->head, __ATOMIC_SEQ_CST) < ring_records) break;
    ring_the_bell(ring);
    futex_wait(&ring->room, seen, 100'000'000);
    if (recorder_is_gone(ring->recorder_process)) {
      __atomic_store_n(&ring->stop, 1, __ATOMIC_RELEASE);
      return false;
    }
    if (__atomic_load_n(&ring->stop, __ATOMIC_ACQUIRE) != 0) return false;
  }
  return true;
}

}  // namespace

void emit(const Thread* t, RecordKind kind, const void* address, std::size_t size, std::uint64_t value) {
  RingHeader* ring = run.ring;
  if (__atomic_load_n(&ring->stop, __ATOMIC_RELAXED) != 0) return;
  std::uint64_t mine;
  if (run.one_at_a_time) {
    mine = ring->tail;
    __atomic_store_n(&ring->tail, mine + 1, __ATOMIC_RELAXED);
  } else {
    mine = __atomic_fetch_add(&ring->tail, 1, __ATOMIC_RELAXED);
  }
  if (mine - __atomic_load_n(&ring->head, __ATOMIC_ACQUIRE) >= ring_records && !wait_for_room(ring, mine))
    return;
  RingRecord& record = records_of(ring)[mine % ring_records];
  record.address = reinterpret_cast<std::uintptr_t>(address);
  record.value = value;
  record.size = static_cast<std::uint16_t>(size);
  record.thread = t->number;
  record.kind = kind;
  __atomic_store_n(&record.stamp, static_cast<std::uint32_t>(mine / ring_records + 1), __ATOMIC_RELEASE);
  if (mine % bell_every == 0 && __atomic_load_n(&ring->recorder_sleeps, __ATOMIC_RELAXED) != 0)
    ring_the_bell(ring);
}

std::uint64_t emit_from_memory(const Thread* t, RecordKind kind, const void* address, std::size_t size) {
  const bool values = run.one_at_a_time;
  if (size <= 8) {
    if (size != 0) emit(t, kind, address, size, values ? value_at(address, size) : 0);
    return size != 0 ? 1 : 0;
  }
  const char* at = static_cast<const char*>(address);
  std::uint64_t pieces = 0;
  while (size > 0) {
    const std::size_t to_boundary = 8 - reinterpret_cast<std::uintptr_t>(at) % 8;
    const std::size_t piece = size < to_boundary ? size : to_boundary;
    emit(t, kind, at, piece, values ? value_at(at, piece) : 0);
    at += piece;
    size -= piece;
    ++pieces;
  }
  return pieces;
}

void settle(Thread* t) {
  if (t->pending.size == 0) return;
  emit_from_memory(t, RecordKind::write, t->pending.address, t->pending.size);
  t->pending.size = 0;
}

}  // namespace earshot::recorder
