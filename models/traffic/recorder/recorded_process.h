// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// RecordedProcess is a program that runs with the recorder's shared memory. The environment it gets is
// padded, so that its stack begins at the same address whatever the caller's environment, directory and path
// to it are.
#pragma once

#include <sys/types.h>

#include <string>
#include <vector>

#include "earshot/traffic/recorder/shared_ring.h"

namespace earshot {

class RecordedProcess {
 public:
  // Makes the shared memory. Throws RecordError.
  RecordedProcess();
  // Ends the program if it runs.
  ~RecordedProcess();
  RecordedProcess(const RecordedProcess&) = delete;
  RecordedProcess& operator=(const RecordedProcess&) = delete;

  // For the requests in it, before start().
  recorder::RingHeader& ring() { return *ring_; }

  // Throws RecordError if there is no such program or it cannot be run.
  void start(const std::vector<std::string>& program);

  // Whether the program has ended; looks, does not wait.
  bool has_ended();

  // The status as waitpid() gives it. REQUIRES: has_ended().
  int status() const { return status_; }

  // Whether the addresses of the program are the same in every run.
  bool addresses_fixed() const { return addresses_fixed_; }

 private:
  int descriptor_ = -1;
  recorder::RingHeader* ring_ = nullptr;
  pid_t process_ = 0;
  bool ended_ = false;
  bool addresses_fixed_ = true;
  int status_ = 0;
};

}  // namespace earshot
