// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "packed_addresses.h"

#include <algorithm>
#include <unordered_set>

namespace earshot {
namespace {

class Moved : public AccessSource {
 public:
  Moved(std::unique_ptr<AccessSource> source, const PackedAddresses& places)
      : source_(std::move(source)), places_(places) {}
  bool next(Access& access) override {
    if (!source_->next(access)) return false;
    access.address = places_.place(access.address);
    return true;
  }

 private:
  std::unique_ptr<AccessSource> source_;
  const PackedAddresses& places_;
};

}  // namespace

PackedAddresses::PackedAddresses(const std::string& recording, const std::vector<Window>& windows)
    : windows_(windows) {
  const auto cached =
      std::find_if(windows.begin(), windows.end(), [](const Window& window) { return window.cached; });
  if (cached == windows.end()) throw RecordingError(recording + ": packed addresses need a cached window");
  base_ = cached->base;

  std::unordered_set<std::uint64_t> touched;
  const auto reader = open_recording(recording);
  for (Access access; reader->next(access);) {
    if (stays(access.address)) continue;
    const std::uint64_t last = (access.address + (access.size - 1)) / page_bytes;
    for (std::uint64_t page = access.address / page_bytes; page <= last; ++page) touched.insert(page);
  }
  pages_.assign(touched.begin(), touched.end());
  std::sort(pages_.begin(), pages_.end());
  const std::uint64_t room =
      (cached->last() - cached->base) / page_bytes + (cached->size % page_bytes == 0 ? 1 : 0);
  if (pages_.size() > room)
    throw RecordingError(recording + ": touches " + std::to_string(pages_.size()) +
                         " pages of 4 KiB; window '" + cached->name + "' has room for " +
                         std::to_string(room));
}

bool PackedAddresses::stays(std::uint64_t address) const {
  return std::any_of(windows_.begin(), windows_.end(),
                     [&](const Window& window) { return !window.cached && window.holds(address); });
}

std::uint64_t PackedAddresses::place(std::uint64_t address) const {
  if (stays(address)) return address;
  const auto page = std::lower_bound(pages_.begin(), pages_.end(), address / page_bytes);
  return base_ + static_cast<std::uint64_t>(page - pages_.begin()) * page_bytes + address % page_bytes;
}

std::unique_ptr<AccessSource> PackedAddresses::moved(std::unique_ptr<AccessSource> source) const {
  return std::make_unique<Moved>(std::move(source), *this);
}

}  // namespace earshot
