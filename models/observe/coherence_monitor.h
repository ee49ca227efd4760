// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// A CoherenceMonitor checks a running system against what coherence means: every read returns the bytes last
// written, a line has at most one owner, a copy that may be written silently is the only one, and memory holds
// the last value of every line nobody owns. It keeps a golden image of every line touched, who wrote it last,
// and the line's last events, and throws CoherenceViolation at the first access that breaks a rule. What memory
// held before the first access to a line is taken from memory. Kernel-free.
#pragma once

#include <array>
#include <cstdint>
#include <functional>
#include <stdexcept>
#include <string>
#include <unordered_map>
#include <vector>

#include "earshot/observe/observer.h"

namespace earshot {

// what(): the rule broken, the bytes involved, and the last events of the line, oldest first.
class CoherenceViolation : public std::runtime_error {
 public:
  using std::runtime_error::runtime_error;
};

class CoherenceMonitor : public Observer {
 public:
  // Copies `length` bytes of memory, not of any cache, at `address` to `to`.
  using MemoryImage = std::function<void(std::uint64_t address, std::uint8_t* to, std::size_t length)>;

  CoherenceMonitor(unsigned line_bytes, MemoryImage memory);

  void accessed(int port, bool write, std::uint64_t address, const std::uint8_t* bytes, std::size_t length) override;
  void changed(int port, std::uint64_t line, const State& from, const State& to) override;
  void settled(std::uint64_t line) override;
  void poked(std::uint64_t address, const std::uint8_t* bytes, std::size_t length) override;

  // After the simulation: every line nobody owns is compared with memory (throws CoherenceViolation). Returns the
  // number of lines still owned, whose bytes memory need not have.
  std::uint64_t check_memory();

  std::uint64_t accesses_checked() const { return accesses_; }
  const std::string& violation() const { return violation_; }  // what was thrown; empty if nothing was

 private:
  struct Copy {
    int port;
    bool owner;
    bool writable;
  };
  struct LineEvent {
    std::uint64_t access = 0;  // number of the access it belongs to, from 1
    int port = -1;
    char what = ' ';           // 'r' read, 'w' write, 's' state change, 'd' debug write
    std::uint32_t offset = 0;
    std::uint32_t length = 0;
    std::uint64_t value = 0;   // the first up to 8 bytes
    const State* from = nullptr;
    const State* to = nullptr;
  };
  static constexpr std::size_t remembered = 12;
  struct Line {
    std::vector<std::uint8_t> golden;
    int last_writer = -1;
    std::vector<Copy> copies;
    std::array<LineEvent, remembered> events;
    std::size_t happened = 0;  // the number of events so far
  };

  Line& line_at(std::uint64_t line);
  void remember(Line& line, const LineEvent& event);
  [[noreturn]] void violate(std::uint64_t address, const Line& line, const std::string& rule);
  void compare_with_memory(std::uint64_t address, const Line& line);

  unsigned line_bytes_;
  MemoryImage memory_;
  std::unordered_map<std::uint64_t, Line> lines_;
  std::uint64_t accesses_ = 0;
  std::string violation_;
};

}  // namespace earshot
