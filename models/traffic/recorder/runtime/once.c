// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// pthread_once(). In C, since its routine may throw, which has to be noticed here, and the runtime must not
// need the C++ library.
#include <pthread.h>

extern const char earshot_part_once;  // see EARSHOT_PART

int earshot_once_is_modelled(void);
int earshot_once_real(pthread_once_t* once, void (*routine)(void));
int earshot_once_begin(pthread_once_t* once);
void earshot_once_end(pthread_once_t* once, int done);

static void give_back(pthread_once_t** unfinished) {
  if (*unfinished != NULL) earshot_once_end(*unfinished, 0);
}

__attribute__((visibility("default"))) int pthread_once(pthread_once_t* once, void (*routine)(void)) {
  if (!earshot_once_is_modelled()) return earshot_once_real(once, routine);
  if (!earshot_once_begin(once)) return 0;
  pthread_once_t* unfinished __attribute__((cleanup(give_back))) = once;
  routine();
  earshot_once_end(once, 1);
  unfinished = NULL;
  return 0;
}

const char earshot_part_once = 0;
