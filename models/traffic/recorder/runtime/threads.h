// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Threads of the recorded program: their beginning and end.
#pragma once

#include <pthread.h>

#include "thread.h"

namespace earshot::recorder {

// Makes the end of every thread known to the scheduler. Called once, by the first thread, before others
// exist.
void watch_for_thread_ends();

// As pthread_create().
int create_thread(pthread_t* handle, const pthread_attr_t* attributes, void* (*start)(void*), void* argument);

}  // namespace earshot::recorder
