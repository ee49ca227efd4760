// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/observe/histogram.h"

#include <algorithm>

namespace earshot {
namespace {

constexpr unsigned octave_bits = 5;
constexpr std::uint64_t per_octave = 1u << octave_bits;

unsigned highest_bit(std::uint64_t value) { return 63u - static_cast<unsigned>(__builtin_clzll(value)); }

std::size_t bucket_of(std::uint64_t value) {
  if (value < 2 * per_octave) return static_cast<std::size_t>(value);
  const unsigned shift = highest_bit(value) - octave_bits;
  return static_cast<std::size_t>(shift * per_octave + (value >> shift));
}

}  // namespace

void Histogram::add(std::uint64_t value, std::uint64_t times) {
  if (times == 0) return;
  const std::size_t bucket = bucket_of(value);
  if (bucket >= buckets_.size()) buckets_.resize(bucket + 1);
  buckets_[bucket].count += times;
  buckets_[bucket].largest = std::max(buckets_[bucket].largest, value);
  count_ += times;
  sum_ += value * times;
  max_ = std::max(max_, value);
}

void Histogram::add(const Histogram& other) {
  if (other.buckets_.size() > buckets_.size()) buckets_.resize(other.buckets_.size());
  for (std::size_t i = 0; i < other.buckets_.size(); ++i) {
    buckets_[i].count += other.buckets_[i].count;
    buckets_[i].largest = std::max(buckets_[i].largest, other.buckets_[i].largest);
  }
  count_ += other.count_;
  sum_ += other.sum_;
  max_ = std::max(max_, other.max_);
}

std::uint64_t Histogram::percentile(unsigned per_cent) const {
  const std::uint64_t rank = count_ / 100 * per_cent + (count_ % 100 * per_cent + 99) / 100;
  std::uint64_t seen = 0;
  for (const Bucket& bucket : buckets_) {
    seen += bucket.count;
    if (seen >= rank && seen > 0) return bucket.largest;
  }
  return max_;
}

}  // namespace earshot
