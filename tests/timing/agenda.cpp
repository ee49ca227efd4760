// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/timing/agenda.h"

#include <catch2/catch.hpp>
#include <random>

#include "arbitrated.h"

using namespace earshot;
using namespace earshot::test;

namespace {

struct Owner : sc_core::sc_module {
  struct Item {
    int number = 0;
    Picoseconds due = 0;
    std::function<void()> also;
  };

  explicit Owner(sc_core::sc_module_name name) : sc_module(name) {
    SC_HAS_PROCESS(Owner);
    SC_METHOD(work);
    sensitive << agenda.due();
    dont_initialize();
  }
  void work() {
    ++runs;
    if (!by_hand) agenda.run();
  }
  Item& at(Picoseconds time, int number) {
    items.push_back(std::make_unique<Item>());
    items.back()->number = number;
    items.back()->due = time;
    agenda.at<&Owner::called>(time, this, items.back().get());
    return *items.back();
  }
  void called(Item* item) {
    CHECK(now_ps() == item->due);
    order += (order.empty() ? "" : " ") + std::to_string(item->number);
    if (item->also) item->also();
  }

  Agenda agenda;
  std::string order;
  unsigned runs = 0;
  bool by_hand = false;
  std::vector<std::unique_ptr<Item>> items;
};

}  // namespace

TEST_CASE("an agenda calls in order of time and, within one time, as asked", "[timing]") {
  Owner owner("owner");
  simulate([&] {
    owner.at(3000, 1);
    owner.at(1000, 2);
    owner.at(3000, 3);
    owner.at(2000, 4);
    owner.at(1000, 5);
    owner.at(0, 6);
    CHECK(owner.order == "");  // never from within at()
    sc_core::wait(ns(10));
    CHECK(owner.order == "6 2 5 4 1 3");
    CHECK(owner.agenda.empty());
    CHECK(owner.runs == 4);  // one notification for each distinct time
  });
}

TEST_CASE("what an agenda's call adds for the same time is done in the same run, behind the rest",
          "[timing]") {
  Owner owner("owner");
  simulate([&] {
    owner.at(1000, 1).also = [&] {
      owner.at(1000, 3).also = [&] { owner.at(1000, 4); };
      owner.at(1500, 5);
    };
    owner.at(1000, 2);
    sc_core::wait(ns(10));
    CHECK(owner.order == "1 2 3 4 5");
    CHECK(owner.runs == 2);
  });
}

TEST_CASE("an agenda can be added to by any process, earlier than what is next, and now", "[timing]") {
  Owner owner("owner");
  simulate([&] {
    owner.at(9000, 1);
    sc_core::wait(ns(1));
    owner.at(5000, 2);
    sc_core::wait(ns(2));
    owner.at(3000, 3);  // now
    sc_core::wait(sc_core::SC_ZERO_TIME);
    sc_core::wait(sc_core::SC_ZERO_TIME);
    CHECK(owner.order == "3");
    CHECK(now_ps() == 3000);
    owner.at(7000, 4);
    sc_core::wait(ns(20));
    CHECK(owner.order == "3 2 4 1");
    CHECK(owner.runs == 4);
  });
}

TEST_CASE("a call that throws leaves the rest of an agenda to be run", "[timing]") {
  Owner owner("owner");
  owner.by_hand = true;
  simulate([&] {
    owner.at(1000, 1).also = [] { throw std::runtime_error("one"); };
    owner.at(1000, 2);
    owner.at(2000, 3);
    sc_core::wait(ns(1));
    CHECK_THROWS_AS(owner.agenda.run(), std::runtime_error);
    owner.by_hand = false;  // the rest is due, and says so
    sc_core::wait(ns(10));
    CHECK(owner.order == "1 2 3");
  });
}

TEST_CASE("an agenda does any mix of times as a sorted list would", "[timing]") {
  Owner owner("owner");
  simulate([&] {
    std::mt19937 random(5);  // seed
    std::vector<std::pair<Picoseconds, int>> expected;
    int number = 0;
    for (int n = 0; n < 300; ++n) {
      const Picoseconds now = now_ps();
      for (int i = 0; i < 4; ++i) {
        const Picoseconds time = now + 1 + random() % 50;
        expected.emplace_back(time, number);
        owner.at(time, number++);
      }
      sc_core::wait(sc_core::sc_time::from_value(random() % 8));
    }
    sc_core::wait(ns(10));
    std::stable_sort(expected.begin(), expected.end(),
                     [](const auto& a, const auto& b) { return a.first < b.first; });
    std::string order;
    for (const auto& [time, which] : expected) order += (order.empty() ? "" : " ") + std::to_string(which);
    CHECK(owner.order == order);
  });
}
