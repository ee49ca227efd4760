// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "traffic/recording_files.h"

#include <unistd.h>
#include <zlib.h>
#include <zstd.h>

#include <algorithm>
#include <atomic>
#include <catch2/catch.hpp>
#include <fstream>
#include <iterator>

#include "earshot/traffic/seeded_random.h"

namespace earshot {

namespace fs = std::filesystem;

TemporaryFolder::TemporaryFolder() {
  static std::atomic<int> serial{0};
  path_ = fs::temp_directory_path() /
          ("earshot-test-" + std::to_string(::getpid()) + "-" + std::to_string(serial++));
  fs::remove_all(path_);
  fs::create_directories(path_);
}

TemporaryFolder::~TemporaryFolder() {
  std::error_code ignored;
  fs::remove_all(path_, ignored);
}

std::vector<std::string> TemporaryFolder::names() const {
  std::vector<std::string> names;
  for (const auto& entry : fs::directory_iterator(path_)) names.push_back(entry.path().filename().string());
  std::sort(names.begin(), names.end());
  return names;
}

void write_file(const std::string& path, const std::string& content) {
  std::ofstream file(path, std::ios::binary);
  file << content;
  REQUIRE(file.flush());
}

std::string read_file(const std::string& path) {
  std::ifstream file(path, std::ios::binary);
  REQUIRE(file);
  return std::string(std::istreambuf_iterator<char>(file), {});
}

std::string gzipped(const std::string& content) {
  z_stream stream{};
  REQUIRE(deflateInit2(&stream, 6, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY) == Z_OK);
  std::string result(deflateBound(&stream, content.size()) + 64, '\0');
  stream.next_in = reinterpret_cast<unsigned char*>(const_cast<char*>(content.data()));
  stream.avail_in = static_cast<uInt>(content.size());
  stream.next_out = reinterpret_cast<unsigned char*>(result.data());
  stream.avail_out = static_cast<uInt>(result.size());
  REQUIRE(deflate(&stream, Z_FINISH) == Z_STREAM_END);
  result.resize(stream.total_out);
  deflateEnd(&stream);
  return result;
}

std::string zstd_compressed(const std::string& content) {
  std::string result(ZSTD_compressBound(content.size()), '\0');
  ZSTD_CCtx* context = ZSTD_createCCtx();
  ZSTD_CCtx_setParameter(context, ZSTD_c_checksumFlag, 1);
  const std::size_t size =
      ZSTD_compress2(context, result.data(), result.size(), content.data(), content.size());
  ZSTD_freeCCtx(context);
  REQUIRE(!ZSTD_isError(size));
  result.resize(size);
  return result;
}

std::string message_of(const std::function<void()>& action) {
  try {
    action();
  } catch (const RecordingError& error) {
    std::string message = error.what();
    const std::size_t folder = message.find("earshot-test-");
    const std::size_t name = folder == std::string::npos ? folder : message.find('/', folder);
    return name == std::string::npos ? message : message.substr(name + 1);
  }
  return "no error";
}

std::vector<Access> read_all(const std::string& path, std::uint32_t only) {
  const auto reader = open_recording(path, only);
  std::vector<Access> accesses;
  for (Access access; reader->next(access);) accesses.push_back(access);
  return accesses;
}

void write_all(const std::string& path, const std::vector<Access>& accesses, const RecordingNotes& notes) {
  const auto writer = create_recording(path, notes);
  for (const Access& access : accesses) writer->write(access);
  writer->finish();
}

std::vector<Access> random_accesses(std::uint64_t seed, std::size_t count) {
  SplitMix64 random(seed);
  const std::uint32_t initiators = 1 + random.below(most_initiators);
  std::vector<Access> accesses(count);
  std::uint64_t near = random.next();
  for (Access& access : accesses) {
    access.initiator = random.below(initiators);
    access.op = static_cast<AccessOp>(random.below(3));
    access.size = random.below(4) != 0 ? 1u << random.below(4) : 1 + random.below(largest_access);
    near = random.below(8) != 0 ? near + random.below(256) - 128 : random.next() >> random.below(64);
    access.address = std::min(near, 0 - std::uint64_t{access.size});
    if (random.below(50) == 0) access.address = 0 - std::uint64_t{access.size};
    access.has_value = access.size <= 8 && random.below(4) != 0;
    if (access.has_value)
      access.value = random.next() >> random.below(64) & (~std::uint64_t{0} >> (64 - 8 * access.size));
  }
  return accesses;
}

std::vector<Access> those_of(std::uint32_t initiator, const std::vector<Access>& accesses) {
  std::vector<Access> those;
  std::copy_if(accesses.begin(), accesses.end(), std::back_inserter(those),
               [initiator](const Access& access) { return access.initiator == initiator; });
  return those;
}

}  // namespace earshot
