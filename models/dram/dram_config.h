// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// DramConfig is everything a DRAM controller is built from: the grade of its devices, how many of them there
// are, and its policies. Times are in clocks of the grade. Kernel-free.
#pragma once

#include <cstdint>
#include <string>
#include <vector>

#include "earshot/dram/grade.h"

namespace earshot {

// In which order queued requests are served.
enum class DramScheduling : std::uint8_t {
  one_at_a_time,  // in order of arrival; the next one's first command waits for the last beat of the one
                  // before
  first_come,     // in order of arrival; commands for the oldest request only
  first_ready,    // row hits first, then the oldest; banks are prepared in parallel; a limit on the age
};

// When an open row is closed, other than for a row of the same bank or for refresh.
enum class DramRows : std::uint8_t {
  open,          // never
  closed,        // with its last queued access, by auto-precharge
  idle_timeout,  // when its bank has not been used for a time
};

enum class DramRefresh : std::uint8_t { all_bank, per_bank, off };

// How the module spends time.
enum class DramPace : std::uint8_t {
  event_driven,  // every command at its clock; b_transport blocks, nb_transport has four phases
  annotated,     // an estimate, added to the delay at once; nothing ever waits
};

struct DramConfig {
  Grade grade;
  unsigned channels = 1;
  unsigned ranks = 1;         // of each channel
  unsigned channel_bits = 0;  // data bits of a channel; 0: the grade's

  DramScheduling scheduling = DramScheduling::first_ready;
  // first_ready, when a row command and a column command could use the same clock of the command bus: column
  // first suits DRAM whose bursts take several clocks; else precharge before activate before column.
  bool row_first = false;
  Clocks age_cap = 2000;  // first_ready: a request older than this goes first

  // A channel's queues, in bursts. Writes wait until there are `write_high` of them, or no reads; then they
  // are served down to `write_low`, respectively until there is a read. (In-order scheduling knows no such
  // turns.)
  unsigned read_queue = 32;
  unsigned write_queue = 32;
  unsigned write_high = 24;
  unsigned write_low = 8;

  DramRows rows = DramRows::open;
  Clocks idle_timeout = 200;  // after the last command to the bank

  std::string address_map = "row rank bank column group channel";  // dram_address_map.h
  bool hash_banks = false;  // group and bank are XORed with the row's low bits

  DramRefresh refresh = DramRefresh::all_bank;

  Clocks frontend = 0;  // from the request to its place in a queue
  Clocks backend = 0;   // from the last beat, or the place in the write queue, to the response
  bool log_commands = false;
  DramPace pace = DramPace::event_driven;

  // What follows from the above. REQUIRES: problems() is empty.
  unsigned width() const { return channel_bits == 0 ? grade.channel_bits : channel_bits; }
  unsigned burst_bytes() const { return width() / 8 * grade.burst_length; }
  std::uint64_t columns() const {  // of a row, in bursts
    return std::uint64_t{grade.page_bytes} * 8 / (std::uint64_t{grade.device_bits} * grade.burst_length);
  }
  std::uint64_t bytes() const {
    return std::uint64_t{channels} * ranks * grade.banks() * grade.rows * columns() * burst_bytes();
  }

  // All that is wrong, the grade's contradictions included; empty if nothing.
  std::vector<std::string> problems() const;
};

}  // namespace earshot
