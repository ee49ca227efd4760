// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests: a bit of everything that C programs do, with a result that it checks.
#define _GNU_SOURCE
#include <errno.h>
#include <pthread.h>
#include <semaphore.h>
#include <stdatomic.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <threads.h>
#include <time.h>
#include <unistd.h>

static void require(int holds, const char* what) {
  if (holds) return;
  fprintf(stderr, "everything: %s\n", what);
  exit(9);
}

struct record {
  int32_t key;
  char text[60];
  struct record* next;
};
struct pair {
  long a, b;
};
struct flags {
  unsigned low : 3, middle : 7, high : 22;
};

static struct record* list;
static struct pair pairs[8];
static struct flags flags;
static pthread_mutex_t mutex = PTHREAD_MUTEX_INITIALIZER;
static pthread_cond_t changed = PTHREAD_COND_INITIALIZER;
static pthread_rwlock_t table_lock = PTHREAD_RWLOCK_INITIALIZER;
static pthread_spinlock_t spin;
static pthread_barrier_t barrier;
static pthread_once_t once = PTHREAD_ONCE_INIT;
static sem_t tokens;
static int initialised, turn, table[32];
static long spun;
static atomic_long total;
static atomic_uchar small;
static __thread int mine;

static void initialise(void) {
  ++initialised;
}

static void lists_and_structures(void) {
  for (int i = 0; i < 100; ++i) {
    struct record* r = malloc(sizeof *r);
    r->key = i;
    sprintf(r->text, "record %d", i);
    r->next = list;
    list = r;
  }
  struct record copy = *list;
  require(copy.key == 99 && strcmp(copy.text, "record 99") == 0, "structure copy");
  *list->next = copy;
  require(list->next->key == 99, "structure copy in place");
  while (list->next != NULL && list->next != list->next->next) {
    struct record* r = list;
    list = list->next;
    free(r);
    if (list->key == 50) break;
  }
  for (int i = 1; i < 8; ++i) {
    pairs[i - 1].a = i;
    pairs[i] = pairs[i - 1];
  }
  require(pairs[7].a == 7 && pairs[6].a == 7, "pairs");
  flags.low = 5;
  flags.high = 77777;
  flags.middle = flags.low + 60;
  require(flags.middle == 65 && flags.high == 77777, "bit fields");
  unsigned char raw[16] = {0};
  uint32_t unaligned;
  memcpy(raw + 3, "\x01\x02\x03\x04", 4);
  memcpy(&unaligned, raw + 3, 4);
  require(unaligned == 0x04030201, "unaligned");
}

static void* work(void* argument) {
  const int number = (int)(intptr_t)argument;
  pthread_once(&once, initialise);
  for (int i = 0; i < 20; ++i) {
    pthread_mutex_lock(&mutex);
    while (turn % 4 != number) pthread_cond_wait(&changed, &mutex);
    ++turn;
    pthread_cond_broadcast(&changed);
    pthread_mutex_unlock(&mutex);

    pthread_spin_lock(&spin);
    ++spun;
    pthread_spin_unlock(&spin);

    if (i % 4 == number) {
      pthread_rwlock_wrlock(&table_lock);
      ++table[i];
    } else {
      pthread_rwlock_rdlock(&table_lock);
      require(table[i] >= 0, "table");
    }
    pthread_rwlock_unlock(&table_lock);

    sem_wait(&tokens);
    atomic_fetch_add(&total, i);
    atomic_fetch_or(&small, 1 << number);
    sem_post(&tokens);
    ++mine;
    if (i % 7 == 0) usleep(100);
  }
  pthread_barrier_wait(&barrier);
  require(mine == 20, "thread-local");
  require(turn == 80 && spun == 80, "behind the barrier");
  return (void*)(intptr_t)(number * 10);
}

static int c11_work(void* argument) {
  *(int*)argument += 1;
  return 33;
}

static void timed(void) {
  struct timespec before, after, until;
  clock_gettime(CLOCK_MONOTONIC, &before);
  struct timespec nap = {0, 5000000};
  nanosleep(&nap, NULL);
  clock_gettime(CLOCK_MONOTONIC, &after);
  require((after.tv_sec - before.tv_sec) * 1000000000 + after.tv_nsec - before.tv_nsec >= 5000000, "sleep");
  clock_gettime(CLOCK_REALTIME, &until);
  until.tv_nsec += until.tv_nsec < 980000000 ? 10000000 : 0;
  sem_t never;
  sem_init(&never, 0, 0);
  require(sem_timedwait(&never, &until) == -1 && errno == ETIMEDOUT, "sem_timedwait");
  pthread_mutex_lock(&mutex);
  until.tv_nsec += until.tv_nsec < 980000000 ? 10000000 : 0;
  require(pthread_cond_timedwait(&changed, &mutex, &until) == ETIMEDOUT, "pthread_cond_timedwait");
  pthread_mutex_unlock(&mutex);
}

int main(void) {
  lists_and_structures();
  pthread_spin_init(&spin, 0);
  pthread_barrier_init(&barrier, NULL, 4);
  sem_init(&tokens, 0, 2);
  pthread_t threads[4];
  for (int i = 0; i < 4; ++i)
    require(pthread_create(&threads[i], NULL, work, (void*)(intptr_t)i) == 0, "create");
  for (int i = 0; i < 4; ++i) {
    void* result;
    require(pthread_join(threads[i], &result) == 0 && (intptr_t)result == i * 10, "join");
  }
  require(total == 4 * 190 && small == 15 && initialised == 1, "totals");

  pthread_mutexattr_t attributes;
  pthread_mutexattr_init(&attributes);
  pthread_mutexattr_settype(&attributes, PTHREAD_MUTEX_RECURSIVE);
  pthread_mutex_t recursive;
  pthread_mutex_init(&recursive, &attributes);
  require(pthread_mutex_lock(&recursive) == 0 && pthread_mutex_lock(&recursive) == 0, "recursive");
  pthread_mutex_unlock(&recursive);
  pthread_mutex_unlock(&recursive);
  pthread_mutexattr_settype(&attributes, PTHREAD_MUTEX_ERRORCHECK);
  pthread_mutex_t checked;
  pthread_mutex_init(&checked, &attributes);
  require(pthread_mutex_lock(&checked) == 0 && pthread_mutex_lock(&checked) == EDEADLK, "error checking");

  thrd_t thread;
  int value = 1, result = 0;
  require(thrd_create(&thread, c11_work, &value) == thrd_success, "thrd_create");
  require(thrd_join(thread, &result) == thrd_success && result == 33 && value == 2, "thrd_join");
  timed();
  FILE* nowhere = fopen("/dev/null", "w");
  fprintf(nowhere, "everything works: %d\n", turn);
  fclose(nowhere);
  return 0;
}
