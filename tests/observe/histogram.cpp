// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/observe/histogram.h"

#include <algorithm>
#include <catch2/catch.hpp>
#include <random>

using namespace earshot;

TEST_CASE("an empty histogram is all zero", "[observe]") {
  const Histogram histogram;
  CHECK(histogram.count() == 0);
  CHECK(histogram.mean() == 0.0);
  CHECK(histogram.percentile(50) == 0);
  CHECK(histogram.max() == 0);
}

TEST_CASE("percentiles of distinct discrete values are exact nearest ranks", "[observe]") {
  Histogram histogram;
  for (std::uint64_t i = 1; i <= 50; ++i) histogram.add(i);
  CHECK(histogram.percentile(1) == 1);
  CHECK(histogram.percentile(50) == 25);
  CHECK(histogram.percentile(99) == 50);
  CHECK(histogram.percentile(100) == 50);
  Histogram latencies;
  latencies.add(1000, 98);
  latencies.add(61000, 1);
  latencies.add(123456, 1);
  CHECK(latencies.percentile(50) == 1000);
  CHECK(latencies.percentile(99) == 61000);
  CHECK(latencies.percentile(100) == 123456);
}

TEST_CASE("sum, count and maximum are exact and a percentile is within 1/32", "[observe]") {
  std::mt19937_64 random(7);  // seed 7
  std::vector<std::uint64_t> values;
  Histogram histogram;
  std::uint64_t sum = 0;
  for (int i = 0; i < 20000; ++i) {
    const std::uint64_t value = random() >> (20 + random() % 40);
    values.push_back(value);
    histogram.add(value);
    sum += value;
  }
  std::sort(values.begin(), values.end());
  CHECK(histogram.count() == 20000);
  CHECK(histogram.sum() == sum);
  CHECK(histogram.max() == values.back());
  for (const unsigned per_cent : {1u, 10u, 50u, 90u, 95u, 99u, 100u}) {
    const std::uint64_t exact = values[20000 / 100 * per_cent - 1];
    CHECK(histogram.percentile(per_cent) >= exact);
    CHECK(histogram.percentile(per_cent) - exact <= exact / 32);
  }
}

TEST_CASE("adding histograms is adding their values", "[observe]") {
  Histogram one, two, both;
  for (std::uint64_t i = 0; i < 1000; ++i) {
    (i % 3 == 0 ? one : two).add(i * i);
    both.add(i * i);
  }
  one.add(two);
  CHECK(one.count() == both.count());
  CHECK(one.sum() == both.sum());
  for (const unsigned per_cent : {5u, 50u, 99u, 100u}) CHECK(one.percentile(per_cent) == both.percentile(per_cent));
}

TEST_CASE("the largest possible value has a bucket", "[observe]") {
  Histogram histogram;
  histogram.add(~std::uint64_t{0});
  CHECK(histogram.percentile(50) == ~std::uint64_t{0});
}
