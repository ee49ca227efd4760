// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Calls after which the memory of a pending write may be gone, or the program itself: the write is recorded
// first.
#include <dlfcn.h>
#include <stdarg.h>
#include <stdlib.h>
#include <sys/mman.h>
#include <unistd.h>

#include "emit.h"

EARSHOT_REAL(free)
EARSHOT_REAL(realloc)
EARSHOT_REAL(munmap)
EARSHOT_REAL(mprotect)
EARSHOT_REAL(dlclose)
EARSHOT_REAL(_exit)
EARSHOT_REAL(abort)

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

void settle_pending() {
  if (Thread* t = modelling()) {
    settle(t);
    leaving(t);
  }
}

}  // namespace

EARSHOT_TAKES(void, free, void* block) {
  settle_pending();
  real::free(block);
}
EARSHOT_TAKES(void*, realloc, void* block, size_t size) {
  settle_pending();
  return real::realloc(block, size);
}
EARSHOT_TAKES(int, munmap, void* address, size_t size) {
  settle_pending();
  return real::munmap(address, size);
}
EARSHOT_TAKES(void*, mremap, void* address, size_t old_size, size_t new_size, int flags, ...) {
  va_list list;
  va_start(list, flags);
  void* new_address = va_arg(list, void*);
  va_end(list);
  settle_pending();
  static void* found;
  if (found == nullptr) found = real_function("mremap");
  return reinterpret_cast<decltype(&::mremap)>(found)(address, old_size, new_size, flags, new_address);
}
EARSHOT_TAKES(int, mprotect, void* address, size_t size, int protection) {
  settle_pending();
  return real::mprotect(address, size, protection);
}
EARSHOT_TAKES(int, dlclose, void* library) {
  settle_pending();
  return real::dlclose(library);
}

EARSHOT_TAKES(void, _exit, int status) {
  settle_pending();
  real::_exit(status);
}
EARSHOT_TAKES(void, _Exit, int status) {
  settle_pending();
  real::_exit(status);
}
EARSHOT_TAKES(void, abort) {
  settle_pending();
  real::abort();
}

EARSHOT_PART(memory)
