// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests that ends in the way its argument names, after 1000 writes.
#include <fcntl.h>
#include <pthread.h>
#include <semaphore.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

static volatile int cells[1000];
static pthread_mutex_t first = PTHREAD_MUTEX_INITIALIZER;
static pthread_mutex_t second = PTHREAD_MUTEX_INITIALIZER;
static sem_t started;

static void* run_for_ever(void* unused) {
  (void)unused;
  sem_post(&started);
  while (cells[0] >= 0) cells[0] = (cells[0] + 1) % 1000;
  return NULL;
}

static void* take_in_other_order(void* unused) {
  (void)unused;
  pthread_mutex_lock(&second);
  sem_post(&started);
  pthread_mutex_lock(&first);
  return NULL;
}

static void* wait_for_ever(void* unused) {
  (void)unused;
  sem_t never;
  sem_init(&never, 0, 0);
  sem_wait(&never);
  return NULL;
}

static void* do_nothing(void* unused) {
  return unused;
}

static void* read_from(void* descriptor) {
  char byte = 0;
  if (read(*(int*)descriptor, &byte, 1) == 1) cells[1] = byte;
  return NULL;
}

int main(int count, char** words) {
  const char* how = count > 1 ? words[1] : "return";
  for (int i = 0; i < 1000; ++i) cells[i] = i;
  pthread_t thread;
  sem_init(&started, 0, 0);
  if (strcmp(how, "return") == 0) return 0;
  if (strcmp(how, "status") == 0) return 3;
  if (strcmp(how, "exit") == 0) exit(2);
  if (strcmp(how, "_exit") == 0) _exit(4);
  if (strcmp(how, "abort") == 0) abort();
  if (strcmp(how, "crash") == 0) raise(SIGSEGV);
  if (strcmp(how, "kill") == 0) kill(getpid(), SIGKILL);
  if (strcmp(how, "never-joined") == 0) {
    pthread_create(&thread, NULL, run_for_ever, NULL);
    sem_wait(&started);
    return 0;
  }
  if (strcmp(how, "detached") == 0) {
    pthread_create(&thread, NULL, run_for_ever, NULL);
    pthread_detach(thread);
    sem_wait(&started);
    exit(5);
  }
  if (strcmp(how, "main-leaves") == 0) {
    pthread_create(&thread, NULL, do_nothing, NULL);
    pthread_exit(NULL);
  }
  if (strcmp(how, "deadlock") == 0) {
    pthread_mutex_lock(&first);
    pthread_create(&thread, NULL, take_in_other_order, NULL);
    sem_wait(&started);
    pthread_mutex_lock(&second);
  }
  if (strcmp(how, "cancel") == 0) {
    void* result = NULL;
    pthread_create(&thread, NULL, wait_for_ever, NULL);
    const struct timespec nap = {0, 1000000};
    nanosleep(&nap, NULL);
    pthread_cancel(thread);
    pthread_join(thread, &result);
    return result == PTHREAD_CANCELED ? 0 : 9;
  }
  if (strcmp(how, "fork") == 0) {
    const pid_t child = fork();
    if (child == 0) {
      for (int i = 0; i < 1000; ++i) cells[i] = 77;  // not recorded
      pthread_mutex_lock(&first);
      _exit(6);
    }
    int status = 0;
    waitpid(child, &status, 0);
    return WEXITSTATUS(status) == 6 ? 0 : 9;
  }
  if (strcmp(how, "pipe") == 0) {
    int ends[2];
    if (pipe(ends) != 0) return 9;
    pthread_create(&thread, NULL, read_from, &ends[0]);
    for (int i = 0; i < 1000; ++i) cells[i] = i;
    if (write(ends[1], "b", 1) != 1) return 9;
    pthread_join(thread, NULL);
    return cells[1] == 'b' || cells[1] == 1 ? 0 : 9;
  }
  if (strcmp(how, "200-threads-in-turn") == 0) {
    for (int i = 0; i < 200; ++i) {
      if (pthread_create(&thread, NULL, do_nothing, NULL) != 0) return 9;
      pthread_join(thread, NULL);
    }
    return 0;
  }
  if (strcmp(how, "64-threads") == 0) {
    for (int i = 0; i < 64; ++i) pthread_create(&thread, NULL, wait_for_ever, NULL);
    return 0;
  }
  if (strcmp(how, "unmapped") == 0) {
    char* block = malloc(1 << 20);  // free() gives it back to the system, right behind a write to it
    block[12345] = 1;
    free(block);
    cells[1] = 2;
    return 0;
  }
  return 9;
}
