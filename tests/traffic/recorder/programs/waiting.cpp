// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A program for the recorder's tests: waits in the ways of C++20, which libstdc++ makes of futexes; waits for
// the world outside; and is interrupted by signals.
#include <poll.h>
#include <signal.h>
#include <sys/time.h>
#include <unistd.h>

#include <atomic>
#include <barrier>
#include <chrono>
#include <condition_variable>
#include <cstdio>
#include <cstdlib>
#include <latch>
#include <mutex>
#include <semaphore>
#include <stdexcept>
#include <string>
#include <thread>
#include <vector>

namespace {

using std::chrono::milliseconds;

void require(bool holds, const char* what) {
  if (holds) return;
  std::fprintf(stderr, "waiting: %s\n", what);
  std::exit(9);
}

// Its initialisation waits, so that others arrive meanwhile.
int slowly_initialised() {
  static const int value = [] {
    static int times = 0;
    std::this_thread::sleep_for(milliseconds(1));
    return ++times;
  }();
  return value;
}

void modern() {
  std::latch latch(4);
  std::barrier barrier(4);
  std::counting_semaphore<8> semaphore(2);
  std::atomic<int> turn{0};
  std::atomic<int> inside{0};
  std::mutex mutex;
  int most_inside = 0;
  std::once_flag once;
  int tries = 0;
  std::vector<std::thread> threads;
  for (int me = 0; me < 4; ++me) {
    threads.emplace_back([&, me] {
      require(slowly_initialised() == 1, "local static variable");
      try {
        std::call_once(once, [&] {
          if (++tries < 3) throw std::runtime_error("not yet");
        });
      } catch (const std::runtime_error&) {
      }
      latch.arrive_and_wait();
      for (int i = 0; i < 10; ++i) {
        for (int seen = turn.load(); seen % 4 != me; seen = turn.load()) turn.wait(seen);
        ++turn;
        turn.notify_all();
        barrier.arrive_and_wait();
        semaphore.acquire();
        const int now_inside = ++inside;
        {
          const std::lock_guard<std::mutex> lock(mutex);
          if (now_inside > most_inside) most_inside = now_inside;
        }
        --inside;
        semaphore.release();
      }
    });
  }
  for (std::thread& thread : threads) thread.join();
  require(turn == 40 && tries == 3, "std::atomic::wait, std::call_once");
  require(most_inside >= 1 && most_inside <= 2, "std::counting_semaphore");
}

void outside() {
  int to_echo[2], from_echo[2];
  require(pipe(to_echo) == 0 && pipe(from_echo) == 0, "pipe");
  std::atomic<bool> done{false};
  int ticks = 0;
  std::thread ticker([&] {
    do {
      ++ticks;
      std::this_thread::sleep_for(milliseconds(1));
    } while (!done);
  });
  std::thread echo([&] {
    char letter = 0;
    while (read(to_echo[0], &letter, 1) == 1 && letter != 'q') {
      ++letter;
      require(write(from_echo[1], &letter, 1) == 1, "echo");
    }
  });
  for (int i = 0; i < 20; ++i) {
    char letter = 'a';
    require(write(to_echo[1], &letter, 1) == 1, "write");
    pollfd ask{from_echo[0], POLLIN, 0};
    require(poll(&ask, 1, -1) == 1 && read(from_echo[0], &letter, 1) == 1 && letter == 'b', "answer");
  }
  static char much[150000];  // more than a pipe holds
  std::thread reader([&] {
    char some[1000];
    for (std::size_t n = 0; n < sizeof much;) {
      const ssize_t got = read(from_echo[0], some, sizeof some);
      require(got > 0, "read");
      n += static_cast<std::size_t>(got);
    }
  });
  for (std::size_t n = 0; n < sizeof much;) {
    const ssize_t put = write(from_echo[1], much + n, sizeof much - n);
    require(put > 0, "write much");
    n += static_cast<std::size_t>(put);
  }
  reader.join();
  const char quit = 'q';
  require(write(to_echo[1], &quit, 1) == 1, "quit");
  echo.join();
  done = true;
  ticker.join();
  require(ticks > 0, "ticker");
}

volatile int handled = 0;
void handle(int) {
  handled = handled + 1;
}

void interrupted() {
  signal(SIGALRM, handle);
  itimerval every{{0, 1000}, {0, 1000}};
  setitimer(ITIMER_REAL, &every, nullptr);
  std::atomic<long> sum{0};
  std::vector<std::thread> threads;
  for (int t = 0; t < 3; ++t) {
    threads.emplace_back([&] {
      std::string text;
      for (int i = 0; i < 1000; ++i) {
        sum += i;
        text += std::to_string(i);
        if (text.size() > 1000) text.clear();
      }
    });
  }
  for (std::thread& thread : threads) thread.join();
  every = {};
  setitimer(ITIMER_REAL, &every, nullptr);
  require(sum == 3L * 1000 * 999 / 2, "sum under interruptions");
}

void watching_the_clock() {
  const auto end = std::chrono::steady_clock::now() + milliseconds(1);
  while (std::chrono::steady_clock::now() < end) {
  }
}

}  // namespace

int main() {
  modern();
  watching_the_clock();
  outside();
  interrupted();
}
