// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Mutexes, for those parts of the runtime whose waiting involves one.
#pragma once

#include <pthread.h>

#include "thread.h"

namespace earshot::recorder {

// As the C library's, but waiting by turns. One at a time, inside the runtime.
int lock_mutex(Thread* t, pthread_mutex_t* mutex, const char* call, std::uint64_t deadline);
int unlock_mutex(pthread_mutex_t* mutex);

}  // namespace earshot::recorder
