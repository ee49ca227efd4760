// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Files that may be compressed, read and written as streams: a CompressedSource is the content of a file with
// gzip or zstd taken off, a CompressedSink a file being written with either put on. Memory use does not grow
// with the length of the file. One object belongs to one thread at a time.
//
// gzip: RFC 1952, several members one after another are one content. zstd: RFC 8878, several frames likewise.
// A frame that needs a window above 128 MiB (made with `zstd --long=28` or more) is refused.
#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <string>
#include <vector>

namespace earshot {

enum class Compression : std::uint8_t { none, gzip, zstd };

// What the end of `path` asks for: .gz, .zst, or none.
Compression compression_of_name(const std::string& path);

// Presents the content through a window that begins at the first byte not yet consumed.
class CompressedSource {
 public:
  // Opens `path` and recognises its compression by its first bytes. A pipe will do.
  // Throws RecordingError if the file cannot be opened or read.
  explicit CompressedSource(const std::string& path);
  ~CompressedSource();

  // Lengthens the window to at least `least` bytes; to fewer only if the content ends there. Returns size().
  // Whatever data() gave before is invalid afterwards. Throws RecordingError for a corrupt or truncated
  // stream.
  std::size_t fill(std::size_t least);

  // The window: bytes [data(), data() + size()). The `slack` bytes behind it may be read; their values mean
  // nothing.
  const unsigned char* data() const { return buffer_.data() + begin_; }
  std::size_t size() const { return end_ - begin_; }
  static constexpr std::size_t slack = 64;

  // Drops the first `count` bytes of the window. REQUIRES: count <= size().
  void consume(std::size_t count);

  // Where data() stands in the content, in bytes from its beginning.
  std::uint64_t position() const { return position_; }
  const std::string& path() const { return path_; }

  class Decoder;  // of compressed.cpp

 private:
  std::string path_;
  std::unique_ptr<Decoder> decoder_;
  std::vector<unsigned char> buffer_;
  std::size_t begin_ = 0;
  std::size_t end_ = 0;
  std::uint64_t position_ = 0;
  bool at_end_ = false;
};

// Writes to a temporary file beside `path`; finish() gives it its name. Until then a file that had the name
// before is untouched, and a sink destroyed unfinished leaves nothing behind.
class CompressedSink {
 public:
  // Throws RecordingError if the temporary cannot be created, or if `path` is there and not a regular file.
  CompressedSink(const std::string& path, Compression compression);
  ~CompressedSink();

  // Throw RecordingError if the file system refuses; the sink is then good for nothing but destruction.
  void write(const void* data, std::size_t count);
  void finish();

  class Encoder;  // of compressed.cpp

 private:
  std::unique_ptr<Encoder> encoder_;
};

}  // namespace earshot
