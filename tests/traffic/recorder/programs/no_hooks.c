// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests that is compiled without hooks, and linked with the recorder or without it.
#include <pthread.h>

int main(void) {
  pthread_mutex_t mutex = PTHREAD_MUTEX_INITIALIZER;
  return pthread_mutex_lock(&mutex);
}
