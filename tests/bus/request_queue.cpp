// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/request_queue.h"

#include <catch2/catch.hpp>
#include <random>

using namespace earshot;

namespace {

BusTransaction transaction(int port, std::uint64_t line) {
  BusTransaction transaction;
  transaction.requester = port;
  transaction.line = line;
  return transaction;
}

std::string text_of(const std::vector<Contender>& contenders) {
  std::string text;
  for (const Contender& contender : contenders)
    text +=
        (text.empty() ? "" : " ") + std::to_string(contender.port) + "@" + std::to_string(contender.since);
  return text;
}

}  // namespace

TEST_CASE("the oldest request of each port contends once it is ready, in port order", "[bus]") {
  BusTransaction a = transaction(3, 0x40), b = transaction(0, 0x80), c = transaction(3, 0xc0);
  RequestQueue queue;
  queue.push({&a, 5, 10});
  queue.push({&b, 7, 20});
  queue.push({&c, 8, 10});
  CHECK(queue.size() == 3);
  CHECK(text_of(queue.contenders(9)) == "");
  CHECK(queue.next_ready(9) == 10);
  CHECK(text_of(queue.contenders(10)) == "3@5");
  CHECK(queue.next_ready(10) == 20);
  CHECK(text_of(queue.contenders(20)) == "0@7 3@5");
  CHECK(queue.next_ready(20) == RequestQueue::never);
  CHECK(queue.take(1).transaction == &a);
  CHECK(text_of(queue.contenders(20)) == "0@7 3@8");
  CHECK(queue.take(0).transaction == &b);
  CHECK(text_of(queue.contenders(20)) == "3@8");
  CHECK(queue.take(0).transaction == &c);
  CHECK(queue.size() == 0);
  CHECK(text_of(queue.contenders(20)) == "");
}

TEST_CASE("a request for a locked line is passed by later ones, of its own port too", "[bus]") {
  BusTransaction a = transaction(0, 0x40), b = transaction(0, 0x80), c = transaction(1, 0x40);
  RequestQueue queue;
  queue.push({&a, 1, 10});
  queue.push({&b, 2, 15});
  queue.push({&c, 3, 10});
  queue.lock(transaction(4, 0x40));
  CHECK(queue.locked(0x40));
  CHECK(text_of(queue.contenders(12)) == "");
  CHECK(queue.next_ready(5) == 15);  // those for the locked line are ready for nothing
  CHECK(text_of(queue.contenders(15)) == "0@2");
  CHECK(queue.take(0).transaction == &b);
  CHECK(queue.next_ready(5) == RequestQueue::never);
  queue.unlock(0x40);
  CHECK_FALSE(queue.locked(0x40));
  CHECK(text_of(queue.contenders(15)) == "0@1 1@3");
}

TEST_CASE("what is held up by its line is told apart from what waits for the bus", "[bus]") {
  BusTransaction a = transaction(0, 0x40), b = transaction(1, 0x80);
  RequestQueue queue;
  queue.push({&a, 1, 1});
  queue.push({&b, 2, 2});
  queue.lock(transaction(4, 0x40));
  std::string told;
  queue.for_each([&](const RequestQueue::Request& request, bool held_up) {
    told += std::to_string(request.transaction->requester) + (held_up ? " held up " : " free ");
  });
  CHECK(told == "0 held up 1 free ");
}

TEST_CASE("an uncached access has no line, but waits for the one before it of its port", "[bus]") {
  tlm::tlm_generic_payload payload;
  BusTransaction io = transaction(2, 0x40), other = transaction(3, 0x40), cached = transaction(2, 0x80);
  io.io = other.io = &payload;
  RequestQueue queue;
  queue.push({&io, 1, 1});
  queue.lock(transaction(4, 0x40));
  CHECK(text_of(queue.contenders(1)) == "2@1");
  CHECK(queue.take(0).transaction == &io);
  queue.lock(io);
  CHECK_FALSE(queue.locked(0x80));
  queue.push({&io, 2, 2});
  queue.push({&cached, 3, 3});
  queue.push({&other, 3, 3});
  CHECK(text_of(queue.contenders(3)) == "2@3 3@3");
  queue.unlock_uncached(2);
  CHECK(text_of(queue.contenders(3)) == "2@2 3@3");
}

TEST_CASE("nobody else's transaction for a line is granted before an access's second one", "[bus]") {
  BusTransaction second = transaction(2, 0x40), waiting = transaction(1, 0x40),
                 another = transaction(1, 0x80);
  second.follows_up = true;
  RequestQueue queue;
  queue.lock(transaction(2, 0x40));
  queue.push({&waiting, 1, 1});
  queue.push({&second, 5, 9});
  queue.push({&another, 6, 6});
  CHECK(text_of(queue.contenders(6)) == "1@6");
  queue.unlock(0x40);
  CHECK(text_of(queue.contenders(6)) == "1@6");  // not ready, but its line is its own
  CHECK(queue.next_ready(6) == 9);
  CHECK(text_of(queue.contenders(9)) == "1@6 2@5");
  CHECK(queue.take(1).transaction == &second);
  CHECK(text_of(queue.contenders(9)) == "1@1");
}

TEST_CASE("port 63, the last there can be, is a port like the others", "[bus]") {
  BusTransaction a = transaction(63, 0x40), b = transaction(0, 0x80);
  RequestQueue queue;
  queue.push({&a, 1, 1});
  queue.push({&b, 1, 1});
  CHECK(text_of(queue.contenders(1)) == "0@1 63@1");
  CHECK(queue.take(1).transaction == &a);
  CHECK(text_of(queue.contenders(1)) == "0@1");
}

TEST_CASE("any mix of requests and locks is as a plain list says", "[bus]") {
  std::mt19937 random(3);  // seed
  std::vector<std::unique_ptr<BusTransaction>> all;
  std::vector<RequestQueue::Request> plain;  // in the order of asking
  std::vector<std::uint64_t> locks;
  RequestQueue queue;
  const auto locked = [&](std::uint64_t line) {
    return std::find(locks.begin(), locks.end(), line) != locks.end();
  };
  for (Picoseconds now = 0; now < 3000; ++now) {
    for (int i = 0; i < 2; ++i)
      if (random() % 2 == 0) {
        all.push_back(
            std::make_unique<BusTransaction>(transaction(static_cast<int>(random() % 5), random() % 4 * 64)));
        plain.push_back({all.back().get(), now, now + random() % 3});
        queue.push(plain.back());
      }
    if (const std::uint64_t line = random() % 4 * 64; !locked(line)) {
      locks.push_back(line);
      queue.lock(transaction(0, line));
    }
    if (locks.size() > 2) {
      queue.unlock(locks.front());
      locks.erase(locks.begin());
    }
    std::vector<std::size_t> expected(5, plain.size());
    Picoseconds next = RequestQueue::never;
    for (std::size_t i = 0; i < plain.size(); ++i) {
      if (locked(plain[i].transaction->line)) continue;
      if (plain[i].ready > now) {
        next = std::min(next, plain[i].ready);
        continue;
      }
      std::size_t& oldest = expected[static_cast<std::size_t>(plain[i].transaction->requester)];
      oldest = std::min(oldest, i);
    }
    std::vector<Contender> contenders;
    for (std::size_t port = 0; port < 5; ++port)
      if (expected[port] < plain.size())
        contenders.push_back({static_cast<int>(port), plain[expected[port]].since});
    REQUIRE(text_of(queue.contenders(now)) == text_of(contenders));
    REQUIRE(queue.next_ready(now) == next);
    REQUIRE(queue.size() == plain.size());
    if (contenders.empty()) continue;
    const std::size_t index = random() % contenders.size();
    const std::size_t place = expected[static_cast<std::size_t>(contenders[index].port)];
    REQUIRE(queue.take(index).transaction == plain[place].transaction);
    plain.erase(plain.begin() + static_cast<std::ptrdiff_t>(place));
  }
}
