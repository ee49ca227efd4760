// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests whose shared memory is only ever touched by its own code: if all its
// writes are recorded with the right values, in the right order, no read needs an explanation.
#include <pthread.h>
#include <sched.h>
#include <stdatomic.h>
#include <stdint.h>
#include <string.h>

enum { threads = 4, rounds = 200, cells = 8 };

struct cell {
  int32_t owner;
  int16_t parts[3];
  unsigned low : 5, high : 20;
  double weight;
  int64_t history[6];
};
struct pair {
  int64_t first, second;
};
struct one {
  int64_t value;
};

static struct cell cells_of_all[cells];
static struct pair pairs[cells];
static struct one ones[cells];
static long double longs[cells];
static uint64_t silent[cells];
static int32_t unescaped_sum;
static volatile int32_t latest;  // written right before whatever may hand over, and read everywhere
static atomic_int ticket;
static _Atomic uint16_t marks[cells];
static int32_t results[threads];
static char text[threads][128];
static pthread_mutex_t mutex = PTHREAD_MUTEX_INITIALIZER;

static void* work(void* argument) {
  const int me = (int)(intptr_t)argument;
  for (int round = 0; round < rounds; ++round) {
    const int at = (round * 7 + me * 3) % cells;
    const int to = (at * 5 + 1) % cells;
    int32_t seen = latest;
    struct cell* cell = &cells_of_all[at];
    cell->owner = me;
    cell->parts[round % 3] = (int16_t)round;
    cell->low = (unsigned)round & 31;
    cell->high = (unsigned)round;
    cell->weight += 0.5;
    cell->history[round % 6] = round;
    cells_of_all[to] = *cell;  // a copy of a structure, racing with others
    pairs[to] = pairs[at];
    pairs[at].second = cell->history[1] + 1000 * me;
    ones[at].value = 1000 * me + round;
    ones[to] = ones[at];
    longs[at] += 1;
    silent[at] = 0;  // a write that changes nothing, and then a read of the same size
    const uint64_t other = silent[to];
    latest = 1000 * me + round;
    seen += latest;
    latest = 2000 * me + round;
    pthread_mutex_lock(&mutex);
    unescaped_sum += (int32_t)other + 1;
    seen += latest;
    latest = 3000 * me + round;
    pthread_mutex_unlock(&mutex);
    seen += latest;
    latest = 4000 * me + round;
    atomic_fetch_add(&ticket, 1);
    seen += latest;
    atomic_fetch_xor(&marks[at], (uint16_t)(1 << me));
    latest = 5000 * me + round;
    memset(text[me], round, sizeof text[me]);
    seen += latest;
    latest = 6000 * me + round;
    memmove(text[me] + 3, text[me], 60);
    memcpy(text[(me + 1) % threads], text[me] + 5, 41);
    seen += latest;
    latest = 7000 * me + round;
    sched_yield();
    results[me] = seen;
  }
  return NULL;
}

int main(void) {
  pthread_t handles[threads];
  for (intptr_t i = 1; i < threads; ++i) pthread_create(&handles[i], NULL, work, (void*)i);
  work(NULL);
  for (int i = 1; i < threads; ++i) pthread_join(handles[i], NULL);
  return unescaped_sum == threads * rounds && ticket == threads * rounds ? 0 : 9;
}
