// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/observe/coherence_monitor.h"

#include <algorithm>
#include <cstring>
#include <sstream>

namespace earshot {
namespace {

std::string hex(std::uint64_t value) {
  std::ostringstream out;
  out << "0x" << std::hex << value;
  return out.str();
}

// Bytes as a little-endian number, or for more than 8 the first 8 and dots.
std::string hex_bytes(const std::uint8_t* bytes, std::size_t length) {
  std::uint64_t value = 0;
  std::memcpy(&value, bytes, std::min<std::size_t>(length, 8));
  return hex(value) + (length > 8 ? "..." : "");
}

std::string cache_name(int port) { return port < 0 ? "nobody" : "cache " + std::to_string(port); }

}  // namespace

CoherenceMonitor::CoherenceMonitor(unsigned line_bytes, MemoryImage memory)
    : line_bytes_(line_bytes), memory_(std::move(memory)) {}

CoherenceMonitor::Line& CoherenceMonitor::line_at(std::uint64_t address) {
  Line& line = lines_[address];
  if (line.golden.empty()) {
    line.golden.resize(line_bytes_);
    memory_(address, line.golden.data(), line_bytes_);
  }
  return line;
}

void CoherenceMonitor::accessed(int port, bool write, std::uint64_t address, const std::uint8_t* bytes,
                                std::size_t length) {
  ++accesses_;
  const std::uint64_t base = address / line_bytes_ * line_bytes_;
  Line& line = line_at(base);
  const std::size_t offset = static_cast<std::size_t>(address - base);

  LineEvent event;
  event.access = accesses_;
  event.port = port;
  event.what = write ? 'w' : 'r';
  event.offset = static_cast<std::uint32_t>(offset);
  event.length = static_cast<std::uint32_t>(length);
  std::memcpy(&event.value, bytes, std::min<std::size_t>(length, 8));
  remember(line, event);

  if (write) {
    std::memcpy(line.golden.data() + offset, bytes, length);
    line.last_writer = port;
  } else if (std::memcmp(line.golden.data() + offset, bytes, length) != 0) {
    violate(base, line,
            cache_name(port) + " read " + hex_bytes(bytes, length) + " at " + hex(address) +
                "; the last value written there is " + hex_bytes(line.golden.data() + offset, length) + ", by " +
                cache_name(line.last_writer));
  }
}

void CoherenceMonitor::changed(int port, std::uint64_t address, const State& from, const State& to) {
  Line& line = line_at(address);
  LineEvent event;
  event.access = accesses_ + 1;
  event.port = port;
  event.what = 's';
  event.from = &from;
  event.to = &to;
  remember(line, event);

  const auto copy = std::find_if(line.copies.begin(), line.copies.end(), [&](const Copy& c) { return c.port == port; });
  if (!to.readable && copy != line.copies.end())
    line.copies.erase(copy);
  else if (to.readable && copy != line.copies.end())
    *copy = {port, to.owner, to.writable};
  else if (to.readable)
    line.copies.push_back({port, to.owner, to.writable});
}

void CoherenceMonitor::settled(std::uint64_t address) {
  const Line& line = line_at(address);
  int owner = -1;
  for (const Copy& copy : line.copies) {
    if (copy.writable && line.copies.size() > 1)
      violate(address, line, cache_name(copy.port) + " may write the line silently, but it is not the only copy");
    if (!copy.owner) continue;
    if (owner >= 0)
      violate(address, line, "the line has two owners, " + cache_name(owner) + " and " + cache_name(copy.port));
    owner = copy.port;
  }
  if (owner < 0) compare_with_memory(address, line);
}

void CoherenceMonitor::compare_with_memory(std::uint64_t address, const Line& line) {
  std::uint8_t held[256];
  memory_(address, held, line_bytes_);
  if (std::memcmp(held, line.golden.data(), line_bytes_) == 0) return;
  std::size_t at = 0;
  while (held[at] == line.golden[at]) ++at;
  violate(address, line,
          "nobody owns the line, but memory is stale: at " + hex(address + at) + " it holds " +
              hex_bytes(&held[at], 1) + ", the last value written is " + hex_bytes(&line.golden[at], 1) + ", by " +
              cache_name(line.last_writer));
}

void CoherenceMonitor::poked(std::uint64_t address, const std::uint8_t* bytes, std::size_t length) {
  while (length > 0) {
    const std::uint64_t base = address / line_bytes_ * line_bytes_;
    const std::size_t offset = static_cast<std::size_t>(address - base);
    const std::size_t piece = std::min<std::size_t>(length, line_bytes_ - offset);
    if (const auto found = lines_.find(base); found != lines_.end()) {
      std::memcpy(found->second.golden.data() + offset, bytes, piece);
      LineEvent event;
      event.access = accesses_ + 1;
      event.what = 'd';
      event.offset = static_cast<std::uint32_t>(offset);
      event.length = static_cast<std::uint32_t>(piece);
      std::memcpy(&event.value, bytes, std::min<std::size_t>(piece, 8));
      remember(found->second, event);
    }
    address += piece;
    bytes += piece;
    length -= piece;
  }
}

std::uint64_t CoherenceMonitor::check_memory() {
  std::vector<std::uint64_t> addresses;  // in order, so that a violation is always the same one
  std::uint64_t owned = 0;
  for (const auto& [address, line] : lines_) {
    const bool has_owner =
        std::any_of(line.copies.begin(), line.copies.end(), [](const Copy& copy) { return copy.owner; });
    if (has_owner)
      ++owned;
    else
      addresses.push_back(address);
  }
  std::sort(addresses.begin(), addresses.end());
  for (const std::uint64_t address : addresses) compare_with_memory(address, lines_.at(address));
  return owned;
}

void CoherenceMonitor::remember(Line& line, const LineEvent& event) {
  line.events[line.happened++ % remembered] = event;
}

void CoherenceMonitor::violate(std::uint64_t address, const Line& line, const std::string& rule) {
  std::ostringstream text;
  text << "coherence violation at access " << accesses_ << ", line " << hex(address) << ": " << rule
       << "\n  the line's last events:";
  const std::size_t first = line.happened > remembered ? line.happened - remembered : 0;
  for (std::size_t i = first; i < line.happened; ++i) {
    const LineEvent& event = line.events[i % remembered];
    text << "\n    access " << event.access << ": ";
    if (event.what == 's') {
      text << cache_name(event.port) << " " << event.from->name << " -> " << event.to->name;
    } else {
      text << (event.what == 'd' ? "a debugger" : cache_name(event.port)) << (event.what == 'r' ? " reads " : " writes ")
           << hex(event.value) << (event.length > 8 ? "..." : "") << " at " << hex(address + event.offset) << ", "
           << event.length << (event.length == 1 ? " byte" : " bytes");
    }
  }
  violation_ = text.str();
  throw CoherenceViolation(violation_);
}

}  // namespace earshot
