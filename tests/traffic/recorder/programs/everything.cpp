// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests: a bit of everything that C++ programs do, with a result that it checks.
#include <algorithm>
#include <array>
#include <atomic>
#include <condition_variable>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <deque>
#include <future>
#include <map>
#include <memory>
#include <mutex>
#include <numeric>
#include <shared_mutex>
#include <stdexcept>
#include <string>
#include <thread>
#include <unordered_map>
#include <vector>

namespace {

[[noreturn]] void fail(const char* what) {
  std::fprintf(stderr, "everything: %s\n", what);
  std::exit(9);
}
void require(bool holds, const char* what) {
  if (!holds) fail(what);
}

struct Sample {
  int id;
  double values[5];
  char name[12];
};
static_assert(sizeof(Sample) > 16);

template <typename T>
class Queue {
 public:
  void push(T value) {
    {
      const std::lock_guard<std::mutex> lock(mutex_);
      items_.push_back(std::move(value));
    }
    filled_.notify_one();
  }
  T pop() {
    std::unique_lock<std::mutex> lock(mutex_);
    filled_.wait(lock, [this] { return !items_.empty(); });
    T value = std::move(items_.front());
    items_.pop_front();
    return value;
  }

 private:
  std::mutex mutex_;
  std::condition_variable filled_;
  std::deque<T> items_;
};

thread_local int visits = 0;
int unshared_counter = 0;

void containers() {
  std::map<std::string, int> ordered;
  std::unordered_map<int, std::string> hashed;
  for (int i = 0; i < 200; ++i) {
    ordered["a rather long key, number " + std::to_string(i * 7919 % 200)] = i;
    hashed[i] = std::string(static_cast<std::size_t>(i % 40), 'x');
  }
  require(ordered.size() == 200 && hashed.at(39).size() == 39, "containers");
  std::vector<int> numbers(500);
  std::iota(numbers.begin(), numbers.end(), 0);
  std::reverse(numbers.begin(), numbers.end());
  std::sort(numbers.begin(), numbers.end());
  require(numbers[123] == 123, "std::sort");
}

void structures() {
  std::vector<Sample> samples;
  for (int i = 0; i < 50; ++i) samples.push_back({i, {1.0 * i, 2, 3, 4, 5}, "sample"});
  Sample copy = samples[7];
  samples[8] = copy;
  samples[9] = samples[8];
  require(samples[9].id == 7 && samples[9].values[0] == 7.0, "structure copy");
  std::array<char, 300> a{};
  std::array<char, 300> b{};
  std::memset(a.data(), 'q', a.size());
  std::memcpy(b.data(), a.data(), b.size());
  std::memmove(b.data() + 1, b.data(), 200);
  std::memmove(b.data(), b.data() + 3, 200);
  require(b[299] == 'q' && b[0] == 'q', "block copies");
}

int compare(const void* a, const void* b) {
  return *static_cast<const int*>(a) - *static_cast<const int*>(b);
}

void library() {
  char text[100];
  std::snprintf(text, sizeof text, "%d %s %.3f", 42, "answers", 1.5);
  require(std::strcmp(text, "42 answers 1.500") == 0, "snprintf");
  char* end = nullptr;
  require(std::strtol(text, &end, 10) == 42 && *end == ' ', "strtol");
  int numbers[64];
  for (int i = 0; i < 64; ++i) numbers[i] = i * 37 % 64;
  std::qsort(numbers, 64, sizeof numbers[0], compare);
  require(numbers[63] == 63, "qsort");
  for (int round = 0; round < 20; ++round) {
    char* block = static_cast<char*>(std::malloc(static_cast<std::size_t>(64 + 4000 * round)));
    block[round] = 'm';
    require(block[round] == 'm', "malloc");
    std::free(block);
  }
  auto* zeros = static_cast<int*>(std::calloc(100000, sizeof(int)));
  require(zeros[77777] == 0, "calloc");
  zeros[77777] = 5;
  std::free(zeros);
}

int throwing(int depth) {
  if (depth == 0) throw std::runtime_error("thrown from the deep");
  return throwing(depth - 1) + 1;
}

void exceptions() {
  int caught = 0;
  for (int i = 0; i < 10; ++i) {
    try {
      throwing(i);
    } catch (const std::runtime_error& error) {
      caught += std::string(error.what()).size() == 20 ? 1 : 0;
    }
  }
  require(caught == 10, "exceptions");
}

void threads() {
  Queue<std::unique_ptr<Sample>> queue;
  std::atomic<int> sum{0};
  std::mutex counter_mutex;
  std::shared_mutex table_mutex;
  std::vector<int> table(64);
  std::once_flag once;
  std::vector<std::thread> workers;
  for (int w = 0; w < 3; ++w) {
    workers.emplace_back([&] {
      static const std::string shared_name = std::string(30, 'n');
      for (;;) {
        std::call_once(once, [] { unshared_counter += 100; });
        const std::unique_ptr<Sample> sample = queue.pop();
        if (sample == nullptr) break;
        ++visits;
        sum += sample->id + static_cast<int>(shared_name.size()) - 30;
        {
          const std::lock_guard<std::mutex> lock(counter_mutex);
          ++unshared_counter;
        }
        if (sample->id % 5 == 0) {
          const std::unique_lock<std::shared_mutex> lock(table_mutex);
          table[static_cast<std::size_t>(sample->id % 64)]++;
        } else {
          const std::shared_lock<std::shared_mutex> lock(table_mutex);
          require(table[static_cast<std::size_t>(sample->id % 64)] >= 0, "shared table");
        }
      }
    });
  }
  for (int i = 1; i <= 300; ++i) {
    queue.push(std::make_unique<Sample>(Sample{i, {}, "queued"}));
    if (i % 50 == 0) std::this_thread::sleep_for(std::chrono::milliseconds(1));
  }
  for (int w = 0; w < 3; ++w) queue.push(nullptr);
  for (std::thread& worker : workers) worker.join();
  require(sum == 300 * 301 / 2, "sum");
  require(unshared_counter == 400, "counter");
  require(visits == 0, "thread-local storage");
}

void spinning() {
  std::atomic<bool> ready{false};
  std::atomic<unsigned __int128> wide{1};
  std::atomic_flag held = ATOMIC_FLAG_INIT;
  long guarded = 0;
  std::thread other([&] {
    while (!ready.load(std::memory_order_acquire)) {
    }
    for (int i = 0; i < 100; ++i) {
      while (held.test_and_set()) {
      }
      ++guarded;
      held.clear();
      unsigned __int128 seen = wide.load();
      while (!wide.compare_exchange_weak(seen, seen * 3)) {
      }
    }
  });
  ready = true;
  for (int i = 0; i < 100; ++i) {
    while (held.test_and_set()) {
    }
    ++guarded;
    held.clear();
    unsigned __int128 seen = wide.load();
    while (!wide.compare_exchange_weak(seen, seen * 3)) {
    }
  }
  other.join();
  unsigned __int128 expected = 1;
  for (int i = 0; i < 200; ++i) expected *= 3;
  require(guarded == 200 && wide == expected, "spinning");
}

void futures() {
  std::vector<std::future<int>> results;
  for (int i = 0; i < 8; ++i) {
    results.push_back(std::async(std::launch::async, [i] { return i * i; }));
  }
  int sum = 0;
  for (std::future<int>& result : results) sum += result.get();
  require(sum == 140, "futures");
  std::mutex mutex;
  std::condition_variable never;
  std::unique_lock<std::mutex> lock(mutex);
  require(!never.wait_for(lock, std::chrono::milliseconds(30), [] { return false; }), "timed wait");
  std::timed_mutex timed;
  timed.lock();
  bool got = true;
  std::thread([&] { got = timed.try_lock_for(std::chrono::milliseconds(20)); }).join();
  require(!got, "timed lock");
}

}  // namespace

int main() {
  containers();
  structures();
  library();
  exceptions();
  threads();
  spinning();
  futures();
  std::FILE* nowhere = std::fopen("/dev/null", "w");
  std::fprintf(nowhere, "everything works: %d\n", unshared_counter);
  std::fclose(nowhere);
}
