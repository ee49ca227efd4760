// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A textbook example played through the real simulator: written out as a recording in text form, read back,
// and in recorded order sent through players, caches, bus and memory. After every access it is noted what
// memory and every cache hold and what the bus did, in words that can stand beside the book's table.
#pragma once

#include <unistd.h>

#include <catch2/catch.hpp>
#include <cstdlib>
#include <fstream>
#include <map>
#include <sstream>
#include <string>
#include <vector>

#include "earshot/traffic/recording.h"
#include "played_system.h"

namespace earshot::test {

// One row of a book's table.
struct BookStep {
  int who;
  AccessOp op;
  std::uint32_t
      value;  // written, or read; what the first read of the example finds is what memory held at first
  // Memory, then every cache, in the book's words: "5 | 5 VALID | -". "-" is a cache without the line. "5
  // INV" is a copy made invalid: the book still prints its old value, here an invalid copy has none, so that
  // it counts as "-".
  const char* after;
  const char* bus;  // what the step did there, as bus_words() says it; "-" for nothing
};

// The difference between two totals in words: the transactions; behind a fetch who supplied the line (memory;
// owner: a cache that must; sharer: a cache with a clean copy); then what memory was given.
inline std::string bus_words(const SnoopingBusTotals& before, const SnoopingBusTotals& now) {
  std::string text;
  const auto say = [&](std::uint64_t times, const std::string& words) {
    for (; times > 0; --times) text += (text.empty() ? "" : ", ") + words;
  };
  std::string supplier;
  if (now.supplied_by_memory > before.supplied_by_memory) supplier += " from memory";
  if (now.supplied_by_owner > before.supplied_by_owner) supplier += " from owner";
  if (now.supplied_by_sharer > before.supplied_by_sharer) supplier += " from sharer";
  for (int i = 0; i < bus_kinds; ++i) {
    const auto kind = static_cast<BusKind>(i);
    const bool fetches = kind == BusKind::read || kind == BusKind::read_exclusive;
    const auto at = static_cast<std::size_t>(i);
    say(now.kind[at].count - before.kind[at].count, name_of(kind) + (fetches ? supplier : ""));
  }
  say(now.block_writes - before.block_writes, "block to memory");
  say(now.word_writes - before.word_writes, "word to memory");
  return text.empty() ? "-" : text;
}

class BookExample {
 public:
  // `book_names`: our state names to the book's.
  BookExample(const Table& protocol, int caches, std::map<std::string, std::string> book_names)
      : book_names_(std::move(book_names)),
        system_("", protocol, caches, Geometry{1024, 2, 32, Replacement::lru, 1}, hooks()) {}

  // Plays the steps in a simulation, to its end, and compares each with what the book says.
  void check(const std::vector<BookStep>& steps) {
    const std::string path = write_recording(steps);
    std::vector<Player*> players;
    for (const auto& player : system_.players) players.push_back(player.get());
    RecordedOrder order("order", players, open_recording(path), true, PlayerHooks{});
    sc_core::sc_start();
    std::remove(path.c_str());

    if (order.end().error) std::rethrow_exception(order.end().error);
    CHECK(order.first_difference() == "");
    REQUIRE(seen_.size() == steps.size());
    for (std::size_t i = 0; i < steps.size(); ++i) {
      INFO("step " << i + 1);
      CHECK(seen_[i].after == without_invalid(steps[i].after));
      CHECK(seen_[i].bus == steps[i].bus);
    }
    system_.monitor->check_memory();
  }

  PlayedSystem& system() { return system_; }

 private:
  static constexpr std::uint64_t location = 0x1044;  // where the book's variable lives

  struct Seen {
    std::string after;
    std::string bus;
  };

  PlayerHooks hooks() {
    PlayerHooks hooks;
    hooks.replace = [this](std::uint32_t who, std::uint64_t address, const sc_core::sc_time& delay) {
      if (system_.cache(static_cast<int>(who)).replace(address, delay) != tlm::TLM_OK_RESPONSE)
        throw PlayError("memory refused a write-back");
    };
    hooks.done = [this] {
      const SnoopingBusTotals now = system_.bus->totals();
      seen_.push_back({held(), bus_words(before_, now)});
      before_ = now;
    };
    return hooks;
  }

  // What memory and the caches hold, in the form of BookStep::after.
  std::string held() {
    std::string text = std::to_string(system_.in_memory(location));
    for (int i = 0; i < static_cast<int>(system_.caches.size()); ++i) {
      text += " | ";
      if (!system_.holds(i, location)) {
        text += "-";
        continue;
      }
      text += std::to_string(system_.in_copy(i, location)) + " " +
              book_names_.at(system_.cache(i).state_of(location));
    }
    return text;
  }

  // "10 | 5 INV | 10 VALID" becomes "10 | - | 10 VALID".
  static std::string without_invalid(const std::string& after) {
    std::istringstream cells(after);
    std::string text;
    for (std::string cell; std::getline(cells, cell, '|');) {
      const std::size_t first = cell.find_first_not_of(' ');
      cell = cell.substr(first, cell.find_last_not_of(' ') + 1 - first);
      const bool invalid = cell.size() > 4 && cell.substr(cell.size() - 4) == " INV";
      text += (text.empty() ? "" : " | ") + (invalid ? "-" : cell);
    }
    return text;
  }

  static std::string write_recording(const std::vector<BookStep>& steps) {
    const char* folder = std::getenv("TMPDIR");
    std::string path = std::string(folder == nullptr ? "/tmp" : folder) + "/book-example-XXXXXX";
    const int descriptor = mkstemp(path.data());
    REQUIRE(descriptor >= 0);
    close(descriptor);
    std::ofstream file(path);
    file << "initiator,op,address,size,value\n";
    for (const BookStep& step : steps) {
      file << step.who << ',' << name_of(step.op) << ',' << location << ",4,";
      if (step.op != AccessOp::replace) file << step.value;
      file << '\n';
    }
    file.close();
    REQUIRE(file);
    return path;
  }

  std::map<std::string, std::string> book_names_;
  SnoopingBusTotals before_;
  std::vector<Seen> seen_;
  PlayedSystem system_;
};

}  // namespace earshot::test
