// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests: four threads count together without any care. What a thread writes
// tells what it really read. The first write of an address to itself says where `shared` is.
#include <pthread.h>
#include <stdint.h>

enum { threads = 4, rounds = 500 };

static struct {
  void* volatile self;       // at 0
  volatile int32_t counter;  // at 8
} shared;

static void* count(void* unused) {
  for (int i = 0; i < rounds; ++i) shared.counter = shared.counter + 1;
  return unused;
}

int main(void) {
  pthread_t handles[threads];
  shared.self = &shared;
  for (int i = 1; i < threads; ++i) pthread_create(&handles[i], NULL, count, NULL);
  count(NULL);
  for (int i = 1; i < threads; ++i) pthread_join(handles[i], NULL);
  return 0;
}
