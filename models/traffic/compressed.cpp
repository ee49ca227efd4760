// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/compressed.h"

#include <fcntl.h>
#include <unistd.h>
#include <zlib.h>
#include <zstd.h>

#include <algorithm>
#include <atomic>
#include <cassert>
#include <cerrno>
#include <cstring>
#include <filesystem>

#include "earshot/traffic/recording.h"

namespace earshot {
namespace {

constexpr std::size_t chunk_bytes = 64 * 1024;
constexpr int gzip_window = 15 + 16;  // zlib's notation for: 32 KiB, gzip wrapper
constexpr int gzip_level = 6;
constexpr int zstd_level = 9;

bool ends_with(const std::string& text, const std::string& end) {
  return text.size() >= end.size() && text.compare(text.size() - end.size(), end.size(), end) == 0;
}

std::string reason() {
  return std::strerror(errno);
}

// A file being read, in chunks. bytes() to bytes() + size() are read and not yet used.
class RawInput {
 public:
  explicit RawInput(const std::string& path)
      : path_(path), file_(::open(path.c_str(), O_RDONLY | O_CLOEXEC)) {
    if (file_ < 0) throw RecordingError(path + ": cannot be opened: " + reason());
  }
  ~RawInput() { ::close(file_); }
  RawInput(const RawInput&) = delete;
  RawInput& operator=(const RawInput&) = delete;

  const unsigned char* bytes() const { return chunk_.data() + used_; }
  std::size_t size() const { return filled_ - used_; }
  std::uint64_t position() const { return position_; }
  const std::string& path() const { return path_; }

  void use(std::size_t count) {
    used_ += count;
    position_ += count;
  }

  // Reads until at least `least` bytes are there or the file ends. REQUIRES: least <= chunk_bytes.
  std::size_t fill(std::size_t least) {
    if (size() >= least) return size();
    std::memmove(chunk_.data(), bytes(), size());
    filled_ = size();
    used_ = 0;
    while (filled_ < least) {
      const ssize_t got = ::read(file_, chunk_.data() + filled_, chunk_.size() - filled_);
      if (got < 0 && errno == EINTR) continue;
      if (got < 0) throw RecordingError(path_ + ": cannot be read: " + reason());
      if (got == 0) break;
      filled_ += static_cast<std::size_t>(got);
    }
    return size();
  }

 private:
  std::string path_;
  int file_;
  std::vector<unsigned char> chunk_ = std::vector<unsigned char>(chunk_bytes);
  std::size_t used_ = 0;
  std::size_t filled_ = 0;
  std::uint64_t position_ = 0;
};

Compression recognise(RawInput& input) {
  input.fill(4);
  const unsigned char* bytes = input.bytes();
  if (input.size() >= 2 && bytes[0] == 0x1f && bytes[1] == 0x8b) return Compression::gzip;
  if (input.size() < 4) return Compression::none;
  const std::uint32_t first = std::uint32_t{bytes[0]} | std::uint32_t{bytes[1]} << 8 |
                              std::uint32_t{bytes[2]} << 16 | std::uint32_t{bytes[3]} << 24;
  // RFC 8878, 3.1.1 and 3.1.2: a frame, or a frame to be skipped that may come before one.
  if (first == 0xfd2fb528u || (first & 0xfffffff0u) == 0x184d2a50u) return Compression::zstd;
  return Compression::none;
}

RecordingError corrupt(const RawInput& input, const std::string& kind, const std::string& detail) {
  return RecordingError(input.path() + ": at byte " + std::to_string(input.position()) + " of the " + kind +
                        " file: corrupt (" + detail + "), expected " + kind +
                        " data; fetch or make the file again");
}

RecordingError cut_short(const RawInput& input, const std::string& kind) {
  return RecordingError(
      input.path() + ": ends at byte " + std::to_string(input.position()) + " of the " + kind +
      " file, expected the rest of the compressed data; the file was cut short, fetch or make it again");
}

}  // namespace

Compression compression_of_name(const std::string& path) {
  if (ends_with(path, ".gz")) return Compression::gzip;
  if (ends_with(path, ".zst")) return Compression::zstd;
  return Compression::none;
}

// Yields a file's content piece by piece.
class CompressedSource::Decoder {
 public:
  virtual ~Decoder() = default;
  // Stores up to `most` bytes; at least one, unless the content ends: then 0.
  virtual std::size_t read(unsigned char* into, std::size_t most) = 0;
};

namespace {

class PlainDecoder : public CompressedSource::Decoder {
 public:
  explicit PlainDecoder(std::unique_ptr<RawInput> input) : input_(std::move(input)) {}
  std::size_t read(unsigned char* into, std::size_t most) override {
    const std::size_t count = std::min(most, input_->fill(1));
    std::memcpy(into, input_->bytes(), count);
    input_->use(count);
    return count;
  }

 private:
  std::unique_ptr<RawInput> input_;
};

class GzipDecoder : public CompressedSource::Decoder {
 public:
  explicit GzipDecoder(std::unique_ptr<RawInput> input) : input_(std::move(input)) {
    if (inflateInit2(&stream_, gzip_window) != Z_OK) throw std::bad_alloc();
  }
  ~GzipDecoder() override { inflateEnd(&stream_); }

  std::size_t read(unsigned char* into, std::size_t most) override {
    stream_.next_out = into;
    stream_.avail_out = static_cast<uInt>(std::min(most, chunk_bytes));
    while (stream_.next_out == into) {
      if (input_->fill(1) == 0) {
        if (inside_member_) throw cut_short(*input_, "gzip");
        return 0;
      }
      step();
    }
    return static_cast<std::size_t>(stream_.next_out - into);
  }

 private:
  void step() {
    inside_member_ = true;
    const std::size_t offered = input_->size();
    stream_.next_in =
        const_cast<unsigned char*>(input_->bytes());  // zlib reads only; its interface predates const
    stream_.avail_in = static_cast<uInt>(offered);
    const int result = inflate(&stream_, Z_NO_FLUSH);
    input_->use(offered - stream_.avail_in);
    if (result == Z_STREAM_END) {
      inside_member_ = false;
      inflateReset(&stream_);
    } else if (result != Z_OK && result != Z_BUF_ERROR) {
      throw corrupt(*input_, "gzip", stream_.msg != nullptr ? stream_.msg : zError(result));
    }
  }

  std::unique_ptr<RawInput> input_;
  z_stream stream_{};
  bool inside_member_ = false;
};

class ZstdDecoder : public CompressedSource::Decoder {
 public:
  explicit ZstdDecoder(std::unique_ptr<RawInput> input)
      : input_(std::move(input)), stream_(ZSTD_createDStream()) {
    if (stream_ == nullptr) throw std::bad_alloc();
  }
  ~ZstdDecoder() override { ZSTD_freeDStream(stream_); }

  std::size_t read(unsigned char* into, std::size_t most) override {
    ZSTD_outBuffer output{into, most, 0};
    while (output.pos == 0) {
      // A frame's last bytes may be used up while its content still waits inside the decoder: ask once more.
      const bool ended = input_->fill(1) == 0;
      if (ended && !inside_frame_) return 0;
      ZSTD_inBuffer in{input_->bytes(), input_->size(), 0};
      const std::size_t result = ZSTD_decompressStream(stream_, &output, &in);
      input_->use(in.pos);
      if (ZSTD_isError(result)) throw corrupt(*input_, "zstd", ZSTD_getErrorName(result));
      inside_frame_ = result != 0;
      if (ended && inside_frame_ && output.pos == 0) throw cut_short(*input_, "zstd");
    }
    return output.pos;
  }

 private:
  std::unique_ptr<RawInput> input_;
  ZSTD_DStream* stream_;
  bool inside_frame_ = false;
};

std::unique_ptr<CompressedSource::Decoder> make_decoder(const std::string& path) {
  auto input = std::make_unique<RawInput>(path);
  switch (recognise(*input)) {
    case Compression::gzip:
      return std::make_unique<GzipDecoder>(std::move(input));
    case Compression::zstd:
      return std::make_unique<ZstdDecoder>(std::move(input));
    case Compression::none:
      break;
  }
  return std::make_unique<PlainDecoder>(std::move(input));
}

}  // namespace

CompressedSource::CompressedSource(const std::string& path)
    : path_(path), decoder_(make_decoder(path)), buffer_(chunk_bytes + slack) {}

CompressedSource::~CompressedSource() = default;

void CompressedSource::consume(std::size_t count) {
  assert(count <= size());
  begin_ += count;
  position_ += count;
}

std::size_t CompressedSource::fill(std::size_t least) {
  if (size() >= least || at_end_) return size();
  std::memmove(buffer_.data(), data(), size());
  end_ = size();
  begin_ = 0;
  if (buffer_.size() < least + slack) buffer_.resize(least + slack);
  while (end_ < least && !at_end_) {
    const std::size_t got = decoder_->read(buffer_.data() + end_, buffer_.size() - slack - end_);
    at_end_ = got == 0;
    end_ += got;
  }
  return size();
}

namespace {

// The temporary file of a sink.
class RawOutput {
 public:
  explicit RawOutput(const std::string& path) : path_(path), target_(path) {
    namespace fs = std::filesystem;
    std::error_code ignored;
    const fs::file_status status = fs::status(path, ignored);
    if (fs::exists(status) && !fs::is_regular_file(status)) {
      throw RecordingError(path +
                           ": cannot be created: is there and not a regular file; choose another name");
    }
    if (fs::is_symlink(fs::symlink_status(path, ignored)))
      target_ = fs::weakly_canonical(path, ignored).string();
    static std::atomic<unsigned> serial{0};  // two sinks of one process may have one target
    temporary_ = target_ + "." + std::to_string(::getpid()) + "-" + std::to_string(serial++) + ".unfinished";
    file_ = ::open(temporary_.c_str(), O_WRONLY | O_CREAT | O_EXCL | O_CLOEXEC, 0666);
    if (file_ < 0) throw RecordingError(path + ": cannot be created: " + reason());
  }
  ~RawOutput() {
    if (file_ >= 0) ::close(file_);
    if (!named_) ::unlink(temporary_.c_str());
  }
  RawOutput(const RawOutput&) = delete;
  RawOutput& operator=(const RawOutput&) = delete;

  void write(const void* data, std::size_t count) {
    const char* bytes = static_cast<const char*>(data);
    while (count > 0) {
      const ssize_t written = ::write(file_, bytes, count);
      if (written < 0 && errno == EINTR) continue;
      if (written < 0) throw RecordingError(path_ + ": cannot be written: " + reason());
      bytes += written;
      count -= static_cast<std::size_t>(written);
    }
  }

  void finish() {
    const int closed = ::close(file_);
    file_ = -1;
    if (closed != 0) throw RecordingError(path_ + ": cannot be written: " + reason());
    if (std::rename(temporary_.c_str(), target_.c_str()) != 0) {
      throw RecordingError(path_ + ": cannot be given its name: " + reason());
    }
    named_ = true;
  }

 private:
  std::string path_;
  std::string target_;  // path_, or the file it is a symbolic link to
  std::string temporary_;
  int file_ = -1;
  bool named_ = false;
};

}  // namespace

// Puts content into a file piece by piece.
class CompressedSink::Encoder {
 public:
  explicit Encoder(const std::string& path) : output_(path) {}
  virtual ~Encoder() = default;
  virtual void write(const void* data, std::size_t count) { output_.write(data, count); }
  virtual void finish() { output_.finish(); }

 protected:
  RawOutput output_;
};

namespace {

class GzipEncoder : public CompressedSink::Encoder {
 public:
  explicit GzipEncoder(const std::string& path) : Encoder(path) {
    constexpr int usual_memory = 8;
    if (deflateInit2(&stream_, gzip_level, Z_DEFLATED, gzip_window, usual_memory, Z_DEFAULT_STRATEGY) !=
        Z_OK) {
      throw std::bad_alloc();
    }
  }
  ~GzipEncoder() override { deflateEnd(&stream_); }

  void write(const void* data, std::size_t count) override {
    const unsigned char* bytes = static_cast<const unsigned char*>(data);
    while (count > 0) {
      const std::size_t piece = std::min(count, chunk_bytes);
      compress(bytes, piece, Z_NO_FLUSH);
      bytes += piece;
      count -= piece;
    }
  }
  void finish() override {
    compress(nullptr, 0, Z_FINISH);
    Encoder::finish();
  }

 private:
  void compress(const unsigned char* bytes, std::size_t count, int flush) {
    stream_.next_in = const_cast<unsigned char*>(bytes);  // zlib reads only; its interface predates const
    stream_.avail_in = static_cast<uInt>(count);
    do {
      stream_.next_out = chunk_.data();
      stream_.avail_out = static_cast<uInt>(chunk_.size());
      deflate(&stream_, flush);
      output_.write(chunk_.data(), chunk_.size() - stream_.avail_out);
    } while (stream_.avail_out == 0);
  }

  z_stream stream_{};
  std::vector<unsigned char> chunk_ = std::vector<unsigned char>(chunk_bytes);
};

class ZstdEncoder : public CompressedSink::Encoder {
 public:
  explicit ZstdEncoder(const std::string& path) : Encoder(path), stream_(ZSTD_createCCtx()) {
    if (stream_ == nullptr) throw std::bad_alloc();
    ZSTD_CCtx_setParameter(stream_, ZSTD_c_compressionLevel, zstd_level);
    ZSTD_CCtx_setParameter(stream_, ZSTD_c_checksumFlag, 1);
  }
  ~ZstdEncoder() override { ZSTD_freeCCtx(stream_); }

  void write(const void* data, std::size_t count) override {
    ZSTD_inBuffer input{data, count, 0};
    while (input.pos < input.size) compress(input, ZSTD_e_continue);
  }
  void finish() override {
    ZSTD_inBuffer nothing{nullptr, 0, 0};
    while (compress(nothing, ZSTD_e_end) != 0) {
    }
    Encoder::finish();
  }

 private:
  std::size_t compress(ZSTD_inBuffer& input, ZSTD_EndDirective directive) {
    ZSTD_outBuffer out{chunk_.data(), chunk_.size(), 0};
    const std::size_t left = ZSTD_compressStream2(stream_, &out, &input, directive);
    if (ZSTD_isError(left)) throw std::bad_alloc();  // with our parameters, memory is all it can lack
    output_.write(chunk_.data(), out.pos);
    return left;
  }

  ZSTD_CCtx* stream_;
  std::vector<unsigned char> chunk_ = std::vector<unsigned char>(chunk_bytes);
};

std::unique_ptr<CompressedSink::Encoder> make_encoder(const std::string& path, Compression compression) {
  switch (compression) {
    case Compression::gzip:
      return std::make_unique<GzipEncoder>(path);
    case Compression::zstd:
      return std::make_unique<ZstdEncoder>(path);
    case Compression::none:
      break;
  }
  return std::make_unique<CompressedSink::Encoder>(path);
}

}  // namespace

CompressedSink::CompressedSink(const std::string& path, Compression compression)
    : encoder_(make_encoder(path, compression)) {}

CompressedSink::~CompressedSink() = default;

void CompressedSink::write(const void* data, std::size_t count) {
  encoder_->write(data, count);
}

void CompressedSink::finish() {
  encoder_->finish();
}

}  // namespace earshot
