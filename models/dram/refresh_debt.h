// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A RefreshDebt says when a rank has to be refreshed. A refresh falls due every interval; it may be postponed
// as long as no more than `postponable` are owed, so that two of them are never more than postponable + 1
// intervals apart (JESD79-3 and -4, postponing refresh commands: 8 and 9 tREFI). Kernel-free.
#pragma once

#include <limits>

#include "earshot/timing/exact_clock.h"

namespace earshot {

class RefreshDebt {
 public:
  static constexpr Clocks never = std::numeric_limits<Clocks>::max();

  RefreshDebt() = default;  // never due
  // `warning`: so many clocks before the last moment the rank must begin to make ready.
  RefreshDebt(Clocks interval, Clocks first, std::uint64_t postponable, Clocks warning)
      : interval_(interval), due_(first), slack_(postponable * interval), warning_(warning) {}

  Clocks due() const { return due_; }  // the oldest one not done
  Clocks last_call() const {
    if (due_ == never) return never;
    return due_ + slack_ > warning_ ? due_ + slack_ - warning_ : 0;
  }
  std::uint64_t owed(Clocks now) const { return now < due_ ? 0 : (now - due_) / interval_ + 1; }
  // `count` are done.
  void pay(std::uint64_t count = 1) { due_ += count * interval_; }

 private:
  Clocks interval_ = 1;
  Clocks due_ = never;
  Clocks slack_ = 0, warning_ = 0;
};

}  // namespace earshot
