// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests that makes exactly the accesses that recorded_accesses.cpp expects. The
// first write of an address to itself says where `box` is.
#include <stdatomic.h>
#include <stdint.h>
#include <string.h>

struct twelve {
  int32_t a, b, c;
};
struct box {
  struct box* volatile self;   // at 0
  volatile int32_t number;     // at 8
  volatile int16_t small;      // at 12
  volatile uint8_t byte;       // at 14
  _Atomic int64_t counter;     // at 16
  int64_t spare;               // at 24
  struct twelve from, to;      // at 32, 44
  char source[20];             // at 56
  char target[20];             // at 76
  _Alignas(16) __int128 wide;  // at 96
  char overlapping[32];        // at 112
};

struct box box;
size_t volatile twenty = 20;  // volatile: not a constant to the compiler; read once, and so recorded once

__attribute__((noinline)) static void copy(struct twelve* to, const struct twelve* from) {
  *to = *from;
}

int main(void) {
  box.self = &box;
  box.number = 7;
  box.small = -2;
  box.byte = (uint8_t)box.number;
  atomic_fetch_add(&box.counter, 5);
  int64_t expected = 6;
  atomic_compare_exchange_strong(&box.counter, &expected, 100);
  copy(&box.to, &box.from);
  memset(box.source, 'x', twenty);
  memcpy(box.target, box.source, sizeof box.source);
  memmove(box.overlapping + 8, box.overlapping, 16);
  __atomic_store_n(&box.wide, (__int128)3 << 64 | 4, __ATOMIC_SEQ_CST);
  box.number = 8;
  return *(volatile int32_t*)&box.to.a;
}
