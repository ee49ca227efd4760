// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/binary_recording.h"

#include <algorithm>
#include <array>
#include <cstring>

#include "earshot/traffic/binary_recording_codec.h"
#include "earshot/traffic/recording_rules.h"

namespace earshot {
namespace {

constexpr std::array<unsigned char, 8> magic = {0xea, 'e', 'a', 'r', 's', 'h', 'o', 't'};
constexpr std::uint16_t order_mark = 0x0102;
constexpr std::uint16_t swapped_mark = 0x0201;
constexpr std::uint16_t approximate_flag = 1;

constexpr std::size_t header_bytes =
    8 + 2 + 2 + 2 + 4;                          // magic, order mark, version, flags, length of the note
constexpr std::size_t frame_bytes = 1 + 4 + 4;  // kind, length of the head, length of the parts
constexpr std::size_t crc_bytes = 4;

enum FrameKind : unsigned char { accesses_frame = 1, end_frame = 2 };

template <typename Number>
void put(std::vector<unsigned char>& bytes, Number number) {
  for (unsigned i = 0; i < sizeof number; ++i) bytes.push_back(static_cast<unsigned char>(number >> (8 * i)));
}

template <typename Number>
Number get(const unsigned char* bytes) {
  Number number = 0;
  for (unsigned i = 0; i < sizeof number; ++i) {
    number = static_cast<Number>(number | static_cast<Number>(Number{bytes[i]} << (8 * i)));
  }
  return number;
}

class BinaryReader : public RecordingReader {
 public:
  BinaryReader(std::unique_ptr<CompressedSource> source, std::uint32_t only)
      : source_(std::move(source)), only_(only) {
    read_header();
  }

  bool next(Access& access) override {
    if (given_ == ready_ && !refill()) return false;
    access = batch_[given_++];
    return true;
  }

  const RecordingNotes& notes() const override { return notes_; }
  std::uint64_t initiators_seen() const override { return initiators_seen_; }

 private:
  // `offset` counts from the beginning of what is consumed.
  [[noreturn]] void fail(std::size_t offset, const std::string& what) const {
    throw RecordingError(source_->path() + ": at byte " + std::to_string(source_->position() + offset) +
                         ": " + what);
  }

  [[noreturn]] void corrupt(const std::string& what) const {
    fail(0, what + "; the file is damaged, fetch or make it again");
  }

  const unsigned char* need(std::size_t count, const char* part) {
    if (source_->fill(count) < count) {
      fail(source_->size(), std::string("the file ends inside ") + part +
                                ", expected the rest of it; the file was cut short, fetch or make it again");
    }
    return source_->data();
  }

  void check_crc(std::size_t covered, const char* part) {
    const unsigned char* bytes = need(covered + crc_bytes, part);
    if (crc_of(bytes, covered) != get<std::uint32_t>(bytes + covered)) {
      corrupt(std::string(part) + " has a CRC that does not match its bytes");
    }
  }

  void read_header() {
    const unsigned char* bytes = need(header_bytes, "the header");
    const auto mark = get<std::uint16_t>(bytes + 8);
    if (mark == swapped_mark) {
      fail(8,
           "written in the other byte order (big-endian), expected little-endian; convert it to the text "
           "form where it "
           "was made");
    }
    if (mark != order_mark) corrupt("the byte-order mark is neither of the two there are");
    const auto version = get<std::uint16_t>(bytes + 10);
    if (version > binary_version) {
      fail(10, "format version " + std::to_string(version) + ", expected at most " +
                   std::to_string(binary_version) +
                   "; read it with a newer earshot, or convert it to the text form there");
    }
    const auto flags = get<std::uint16_t>(bytes + 12);
    const auto note_bytes = get<std::uint32_t>(bytes + 14);
    if (note_bytes > most_note_bytes) corrupt("the header says that its note is impossibly long");
    check_crc(header_bytes + note_bytes, "the header");
    if (version == 0 || (flags & ~approximate_flag) != 0)
      corrupt("the header has a version or a flag that does not exist");
    notes_.exact_order = (flags & approximate_flag) == 0;
    notes_.text.assign(reinterpret_cast<const char*>(source_->data()) + header_bytes, note_bytes);
    const std::string problem = problem_with(notes_);
    if (!problem.empty()) corrupt("the header has " + problem);
    source_->consume(header_bytes + note_bytes + crc_bytes);
  }

  // Stores the next accesses in batch_; false at the end of the recording.
  bool refill() {
    given_ = ready_ = 0;
    while (!at_end_) {
      try {
        ready_ = decoder_.decode(batch_.data(), batch_.size());
        if (ready_ > 0) return true;
        next_frame();
      } catch (const BlockError& error) {
        at_end_ = true;
        corrupt(std::string("a block is malformed (") + error.what() + ")");
      } catch (...) {
        at_end_ = true;
        throw;
      }
    }
    return false;
  }

  // The block stays in the source's window while it is decoded.
  void next_frame() {
    source_->consume(frame_size_);
    frame_size_ = 0;
    const unsigned char* bytes = need(frame_bytes, "a block");
    const unsigned char kind = bytes[0];
    const auto head = get<std::uint32_t>(bytes + 1);
    const auto parts = get<std::uint32_t>(bytes + 5);
    if (kind != accesses_frame && kind != end_frame) corrupt("a block of a kind that does not exist");
    if (head > most_head_bytes || parts > most_parts_bytes)
      corrupt("a block that says it is impossibly long");
    check_crc(frame_bytes + head, "a block");
    if (kind == end_frame) return read_end(head, parts);
    const std::size_t parts_at = frame_bytes + head + crc_bytes;
    bytes = need(parts_at + parts, "a block");
    decoder_.open({bytes + frame_bytes, bytes + frame_bytes + head},
                  {bytes + parts_at, bytes + parts_at + parts}, only_);
    count_ += decoder_.count();
    initiators_seen_ |= decoder_.initiators();
    frame_size_ = parts_at + parts;
  }

  void read_end(std::size_t head, std::size_t parts) {
    at_end_ = true;
    if (head != sizeof count_ || parts != 0) corrupt("the end block has an impossible length");
    const auto expected = get<std::uint64_t>(source_->data() + frame_bytes);
    if (expected != count_) {
      corrupt("the end block tells of " + std::to_string(expected) + " accesses, but " +
              std::to_string(count_) + " came before it");
    }
    source_->consume(frame_bytes + head + crc_bytes);
    if (source_->fill(1) > 0) corrupt("more bytes after the end block");
  }

  static_assert(CompressedSource::slack >= BlockDecoder::slack, "a block is decoded in the source's window");

  std::unique_ptr<CompressedSource> source_;
  const std::uint32_t only_;
  std::uint64_t initiators_seen_ = 0;
  RecordingNotes notes_;
  BlockDecoder decoder_;
  std::size_t frame_size_ = 0;  // of the block being decoded, at the front of the source's window
  std::uint64_t count_ = 0;     // accesses in the blocks opened, of every initiator
  std::array<Access, 256> batch_;
  std::size_t given_ = 0;  // of batch_
  std::size_t ready_ = 0;  // in batch_
  bool at_end_ = false;
};

class BinaryWriter : public RecordingWriter {
 public:
  BinaryWriter(const std::string& path, const RecordingNotes& notes, Compression compression)
      : path_(path), sink_(path, compression) {
    std::vector<unsigned char> header(magic.begin(), magic.end());
    put(header, order_mark);
    put(header, binary_version);
    put(header, notes.exact_order ? std::uint16_t{0} : approximate_flag);
    put(header, static_cast<std::uint32_t>(notes.text.size()));
    header.insert(header.end(), notes.text.begin(), notes.text.end());
    write_with_crc(header);
  }

  void write(const Access& access) override {
    const std::string problem = problem_with(access);
    if (!problem.empty()) throw RecordingError(path_ + ": access " + std::to_string(count_) + ": " + problem);
    encoder_.add(access);
    ++count_;
    if (encoder_.count() == block_accesses) write_block();
  }

  void finish() override {
    if (encoder_.count() > 0) write_block();
    std::vector<unsigned char> head;
    put(head, count_);
    write_frame(end_frame, head, {});
    sink_.finish();
  }

 private:
  void write_block() {
    std::vector<unsigned char> head, parts;
    encoder_.encode(head, parts);
    write_frame(accesses_frame, head, parts);
  }

  void write_frame(FrameKind kind, const std::vector<unsigned char>& head,
                   const std::vector<unsigned char>& parts) {
    std::vector<unsigned char> bytes = {kind};
    put(bytes, static_cast<std::uint32_t>(head.size()));
    put(bytes, static_cast<std::uint32_t>(parts.size()));
    bytes.insert(bytes.end(), head.begin(), head.end());
    write_with_crc(bytes);
    sink_.write(parts.data(), parts.size());
  }

  void write_with_crc(std::vector<unsigned char>& bytes) {
    put(bytes, crc_of(bytes.data(), bytes.size()));
    sink_.write(bytes.data(), bytes.size());
  }

  const std::string path_;
  CompressedSink sink_;
  BlockEncoder encoder_;
  std::uint64_t count_ = 0;
};

}  // namespace

bool is_binary(CompressedSource& source) {
  const std::size_t count = std::min(source.fill(magic.size()), magic.size());
  return count > 0 && std::memcmp(source.data(), magic.data(), count) == 0;
}

std::unique_ptr<RecordingReader> read_binary(std::unique_ptr<CompressedSource> source, std::uint32_t only) {
  return std::make_unique<BinaryReader>(std::move(source), only);
}

std::unique_ptr<RecordingWriter> write_binary(const std::string& path, const RecordingNotes& notes,
                                              Compression compression) {
  return std::make_unique<BinaryWriter>(path, notes, compression);
}

}  // namespace earshot
