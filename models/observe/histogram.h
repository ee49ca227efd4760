// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A Histogram counts values in buckets whose width grows with the value: 32 buckets an octave, so that a
// percentile is never off by more than 1/32 of itself, in bounded memory, whatever the values. It is exact where
// a bucket saw one value only, as for values below 64. Sum, count and maximum are exact. Kernel-free.
#pragma once

#include <cstdint>
#include <vector>

namespace earshot {

class Histogram {
 public:
  void add(std::uint64_t value, std::uint64_t times = 1);
  void add(const Histogram& other);

  std::uint64_t count() const { return count_; }
  std::uint64_t sum() const { return sum_; }
  std::uint64_t max() const { return max_; }
  double mean() const { return count_ == 0 ? 0.0 : static_cast<double>(sum_) / static_cast<double>(count_); }

  // The nearest-rank percentile, rounded up to the largest value seen in its bucket. 0 if nothing was added.
  // REQUIRES: 1 <= per_cent <= 100.
  std::uint64_t percentile(unsigned per_cent) const;

 private:
  struct Bucket {
    std::uint64_t count = 0;
    std::uint64_t largest = 0;
  };
  std::vector<Bucket> buckets_;
  std::uint64_t count_ = 0;
  std::uint64_t sum_ = 0;
  std::uint64_t max_ = 0;
};

}  // namespace earshot
