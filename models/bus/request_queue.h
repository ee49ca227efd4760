// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A RequestQueue holds what the ports of a bus ask for and knows which of it may be granted: a request is ready from
// some time on, and only one transaction for a line, and one uncached access of a port, may be under way; later ones
// wait here. Kernel-free.
#pragma once

#include <cstdint>
#include <vector>

#include "earshot/bus/arbiter.h"
#include "earshot/bus/transaction.h"

namespace earshot {

class RequestQueue {
 public:
  struct Request {
    BusTransaction* transaction = nullptr;
    Picoseconds since = 0;  // when it was asked for
    Picoseconds ready = 0;  // not to be granted before
  };
  static constexpr Picoseconds never = ~Picoseconds{0};

  // REQUIRES: 0 <= transaction.requester < 64. A transaction with `io` set has no line.
  void push(const Request& request);
  // The oldest request of each port that may be granted at `now`, in port order. Valid until the next call.
  const std::vector<Contender>& contenders(Picoseconds now);
  // Takes out the request of contenders()[index].
  Request take(std::size_t index);
  // When the next request becomes ready that is not yet at `now` and whose line is free; `never` if none.
  Picoseconds next_ready(Picoseconds now) const;

  // A transaction is under way / has ended.
  void lock(const BusTransaction& transaction);
  void unlock(std::uint64_t line);
  void unlock_uncached(int port) { uncached_ &= ~(std::uint64_t{1} << port); }
  bool locked(std::uint64_t line) const;

  std::size_t size() const { return size_; }
  // Each request, with what it waits for beside the bus itself.
  template <typename Tell>
  void for_each(Tell tell) const {
    for (const auto& port : ports_)
      for (const Request& request : port) tell(request, held_up(request));
  }

 private:
  bool held_up(const Request& request) const;
  std::size_t oldest(std::size_t port, Picoseconds now) const;

  std::vector<std::vector<Request>> ports_;  // each in the order of asking
  std::uint64_t asking_ = 0;                 // one bit for a port that has requests
  std::size_t size_ = 0;
  std::vector<std::uint64_t> locked_;        // lines
  std::vector<const BusTransaction*> follow_ups_;  // asked for: their lines are theirs
  std::uint64_t uncached_ = 0;               // one bit for a port with an uncached access under way
  std::vector<Contender> contenders_;
  std::vector<std::size_t> places_;          // of the contenders, in their ports
};

}  // namespace earshot
