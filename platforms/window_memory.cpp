// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "window_memory.h"

namespace earshot {

WindowMemory::WindowMemory(const Window& window, const Settings& settings) : window_(window) {
  const std::string name = "memory_" + window.name;
  if (window.cached && settings.memory_kind == MemoryKind::dram) {
    dram_ = std::make_unique<DramController>(name.c_str(), settings.dram);
    return;
  }
  PlainMemoryConfig config;
  config.read_latency = from_ps(settings.read_latency);
  config.write_latency = from_ps(settings.write_latency);
  config.beat_time = from_ps(settings.beat_time);
  config.beat_bytes = settings.beat_bytes;
  plain_ = std::make_unique<PlainMemory>(name.c_str(), config);
}

void WindowMemory::peek(std::uint64_t address, std::uint8_t* to, std::size_t length) const {
  const std::uint64_t target = address - window_.base + window_.target_base;
  if (dram_)
    dram_->peek(target, to, length);
  else
    plain_->peek(target, to, length);
}

}  // namespace earshot
