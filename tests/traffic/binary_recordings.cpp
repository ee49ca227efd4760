// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <zlib.h>

#include <catch2/catch.hpp>

#include "earshot/traffic/seeded_random.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

// Decoded from what 'bytes' say, whatever the error: accesses up to it, then its message.
struct Outcome {
  std::vector<Access> accesses;
  RecordingNotes notes;
  std::string message = "no error";
};

Outcome outcome_of(const std::string& bytes, std::uint32_t only = every_initiator) {
  TemporaryFolder folder;
  write_file(folder.file("r.ear"), bytes);
  Outcome outcome;
  outcome.message = message_of([&] {
    const auto reader = open_recording(folder.file("r.ear"), only);
    outcome.notes = reader->notes();
    for (Access access; reader->next(access);) outcome.accesses.push_back(access);
  });
  return outcome;
}

std::string binary_of(const std::vector<Access>& accesses, const RecordingNotes& notes = {}) {
  TemporaryFolder folder;
  write_all(folder.file("r.ear"), accesses, notes);
  return read_file(folder.file("r.ear"));
}

std::string little_endian(std::uint64_t number, unsigned bytes) {
  std::string text;
  for (unsigned i = 0; i < bytes; ++i) text += static_cast<char>(number >> (8 * i));
  return text;
}

std::string crc_of(const std::string& bytes) {
  return little_endian(
      crc32(0, reinterpret_cast<const Bytef*>(bytes.data()), static_cast<uInt>(bytes.size())), 4);
}

std::string with_crc(const std::string& bytes) {
  return bytes + crc_of(bytes);
}

std::string frame(int kind, const std::string& head, const std::string& parts) {
  return with_crc(static_cast<char>(kind) + little_endian(head.size(), 4) + little_endian(parts.size(), 4) +
                  head) +
         parts;
}

const std::string header = with_crc(
    "\xea"
    "earshot" +
    little_endian(0x0102, 2) + little_endian(1, 2) + little_endian(0, 2) + little_endian(0, 4));

std::string end_of(std::uint64_t count) {
  return frame(2, little_endian(count, 8), "");
}

constexpr std::size_t header_size = 22;

std::vector<Access> a_few() {
  std::vector<Access> accesses = random_accesses(11, 12);
  for (Access& access : accesses) access.initiator %= 3;
  return accesses;
}

TEST_CASE("the worked example of the README is what the writer writes", "[traffic]") {
  const std::vector<Access> accesses = {{3, AccessOp::write, true, 4, 0x1000, 0x2a},
                                        {3, AccessOp::read, true, 4, 0x1000, 0x2a},
                                        {0, AccessOp::read, false, 64, 0x1004, 0}};
  const char* expected =
      "ea 65 61 72 73 68 6f 74 02 01 01 00 00 00 00 00 00 00 ff 61 61 8b "
      "01 15 00 00 00 0b 00 00 00 "
      "02 03 02 02 04 01 73 aa aa 99 00 01 01 03 00 d4 9a 9f 79 02 01 20 fd 6f bc "
      "49 28 80 80 08 00 54 18 80 81 08 "
      "02 08 00 00 00 00 00 00 00 03 00 00 00 00 00 00 00 d6 f9 4f e0 ";
  std::string written;
  for (const char byte : binary_of(accesses)) {
    char text[4];
    std::snprintf(text, sizeof text, "%02x ", static_cast<unsigned>(static_cast<unsigned char>(byte)));
    written += text;
  }
  CHECK(written == expected);
}

TEST_CASE("a binary recording cut at any byte is refused with the byte", "[traffic]") {
  RecordingNotes notes;
  notes.text = "cut me";
  const std::string whole = binary_of(a_few(), notes);
  REQUIRE(outcome_of(whole).message == "no error");
  for (std::size_t length = 1; length < whole.size(); ++length) {
    const char* part = length < header_size + notes.text.size() ? "the header" : "a block";
    CHECK(outcome_of(whole.substr(0, length)).message ==
          "r.ear: at byte " + std::to_string(length) + ": the file ends inside " + part +
              ", expected the rest of it; the file was cut short, fetch or make it again");
  }
}

TEST_CASE("a binary recording with any bit flipped is refused", "[traffic]") {
  RecordingNotes notes;
  notes.text = "flip me";
  const std::string whole = binary_of(a_few(), notes);
  for (std::size_t bit = 0; bit < whole.size() * 8; ++bit) {
    std::string flipped = whole;
    flipped[bit / 8] = static_cast<char>(flipped[bit / 8] ^ (1 << (bit % 8)));
    INFO("bit " << bit % 8 << " of byte " << bit / 8);
    CHECK(outcome_of(flipped).message != "no error");
  }
}

TEST_CASE("reading one initiator checks that initiator's part and leaves the others alone", "[traffic]") {
  std::vector<Access> accesses(2);
  accesses[0] = {0, AccessOp::write, true, 8, 0x1000, 0x1122334455667788};
  accesses[1] = {1, AccessOp::write, true, 8, 0x1000, 0x99aabbccddeeff00};
  std::string bytes = binary_of(accesses);
  bytes[bytes.size() - end_of(2).size() - 1] ^= 1;  // the last byte of the last part: initiator 1's value
  CHECK(outcome_of(bytes, 0).message == "no error");
  CHECK(outcome_of(bytes, 0).accesses == std::vector<Access>{accesses[0]});
  CHECK(outcome_of(bytes, 1).message ==
        "r.ear: at byte 22: a block is malformed (a part has a CRC that does not match its bytes); the file "
        "is damaged, "
        "fetch or make it again");
}

TEST_CASE("the other byte order and a newer version are refused by name", "[traffic]") {
  const std::string magic =
      "\xea"
      "earshot";
  const std::string tail = little_endian(0, 2) + little_endian(0, 4);
  CHECK(outcome_of(with_crc(magic + "\x01\x02" + std::string("\0\x01", 2) + tail) + end_of(0)).message ==
        "r.ear: at byte 8: written in the other byte order (big-endian), expected little-endian; convert it "
        "to the text "
        "form where it was made");
  CHECK(outcome_of(with_crc(magic + little_endian(0x0102, 2) + little_endian(2, 2) + tail) + end_of(0))
            .message ==
        "r.ear: at byte 10: format version 2, expected at most 1; read it with a newer earshot, or convert "
        "it to the text "
        "form there");
  CHECK(outcome_of(with_crc(magic + "xx" + little_endian(1, 2) + tail) + end_of(0)).message ==
        "r.ear: at byte 0: the byte-order mark is neither of the two there are; the file is damaged, fetch "
        "or make it again");
}

// What a file says whose CRCs are right, but which no writer writes.
struct Forgery {
  const char* claim;
  std::string bytes;
  std::string message;
};

// A directory entry: initiator, accesses, bytes of the three columns, CRC of the part.
std::string entry(int initiator, int count, const std::string& ops, const std::string& addresses,
                  const std::string& values) {
  std::string bytes;
  for (const std::size_t number : {static_cast<std::size_t>(initiator), static_cast<std::size_t>(count),
                                   ops.size(), addresses.size(), values.size()}) {
    bytes += static_cast<char>(number);
  }
  return bytes + crc_of(ops + addresses + values);
}

// A file of one block with one part, of initiator 0, and an order of one run.
std::string file_of(int count, const std::string& ops, const std::string& addresses,
                    const std::string& values) {
  const std::string head = "\x01" + entry(0, count, ops, addresses, values) + static_cast<char>(count - 1);
  return header + frame(1, head, ops + addresses + values) + end_of(static_cast<std::uint64_t>(count));
}

std::string malformed(const std::string& what) {
  return "r.ear: at byte 22: a block is malformed (" + what +
         "); the file is damaged, fetch or make it again";
}

std::string damaged(std::size_t byte, const std::string& what) {
  return "r.ear: at byte " + std::to_string(byte) + ": " + what +
         "; the file is damaged, fetch or make it again";
}

TEST_CASE("a forged binary recording with valid CRCs is refused", "[traffic]") {
  const std::string read_4("\x08", 1);  // op read, size 4, no value
  const std::string here("\0", 1);      // cursor 0, step 0
  const std::string none;
  const std::string good = entry(0, 1, read_4, here, none);
  const std::string run("\0", 1);
  const std::string part = read_4 + here;
  REQUIRE(outcome_of(file_of(1, read_4, here, none)).message == "no error");
  REQUIRE(outcome_of(header + end_of(0)).message == "no error");

  const std::string varint_10 = std::string(9, '\xff') + "\x01";
  const Forgery forgeries[] = {
      {"op 3", file_of(1, "\x0b", here, none), malformed("an access has an op of a newer version")},
      {"bit 7 of the op", file_of(1, "\x88", here, none),
       malformed("an access has an op of a newer version")},
      {"size 0", file_of(1, std::string("\x1c\0", 2), here, none),
       malformed("an access has an impossible size")},
      {"size 4097", file_of(1, "\x1c\x81\x20", here, none), malformed("an access has an impossible size")},
      {"size 2^64 - 1", file_of(1, "\x1c" + varint_10, here, none),
       malformed("an access has an impossible size")},
      {"past the last address", file_of(1, read_4, "\x10", none),
       malformed("an access goes past the end of the address space")},
      {"a value with size 16", file_of(1, "\x30", here, none),
       malformed("an access above 8 bytes has a value")},
      {"a value too wide", file_of(1, "\x40", here, "\x80\x04"),
       malformed("a value is too wide for its access")},
      {"too few ops", file_of(2, read_4, here + here, none), malformed("a column is cut short")},
      {"too few addresses", file_of(2, read_4 + read_4, here, none), malformed("a column is cut short")},
      {"an address cut short", file_of(1, read_4, "\x80", none), malformed("a column is cut short")},
      {"an op cut short", file_of(1, "\x1c", "\x01", none), malformed("a column is cut short")},
      {"a value cut short", file_of(1, "\x68", here, "abc"), malformed("a column is cut short")},
      {"too many ops", file_of(1, read_4 + read_4, here, none),
       malformed("a column is longer than its accesses need")},
      {"too many values", file_of(1, read_4, here, "x"),
       malformed("a column is longer than its accesses need")},
      {"65 parts", header + frame(1, "\x41", ""), malformed("it has more streams than there are initiators")},
      {"initiator 64", header + frame(1, "\x01" + entry(64, 1, read_4, here, none) + run, part),
       malformed("a stream's initiator is out of range")},
      {"an initiator twice", header + frame(1, "\x02" + good + good + run + "\x01", part + part),
       malformed("an initiator has two streams")},
      {"65537 accesses", header + frame(1, std::string("\x01\0\x81\x80\x04", 5), ""),
       malformed("it has more accesses than a block may")},
      {"a column beyond the block", header + frame(1, "\x01" + good + run, read_4),
       malformed("a column is longer than the block")},
      {"bytes behind the parts", header + frame(1, "\x01" + good + run, part + "x"),
       malformed("its columns are shorter than the block")},
      {"an empty head", header + frame(1, "", ""), malformed("its directory is cut short")},
      {"half a directory", header + frame(1, "\x01" + good.substr(0, 7), part),
       malformed("its directory is cut short")},
      {"no order", header + frame(1, "\x01" + good, part), malformed("its order ends too early")},
      {"half a run", header + frame(1, "\x01" + good + "\x80", part), malformed("its order is cut short")},
      {"a run of nobody",
       header + frame(1,
                      "\x03" + good + entry(1, 0, none, none, none) + entry(2, 0, none, none, none) + "\x03",
                      part),
       malformed("its order names a stream that is not there")},
      {"a run of 2", header + frame(1, "\x01" + good + "\x01", part),
       malformed("its order has a run that is too long")},
      {"two runs", header + frame(1, "\x01" + good + run + run, part),
       malformed("its order is longer than its accesses need")},
      {"an unknown kind", header + frame(3, "", ""), damaged(22, "a block of a kind that does not exist")},
      {"a head of 4 GiB", header + "\x01\xff\xff\xff\xff" + std::string(4, '\0'),
       damaged(22, "a block that says it is impossibly long")},
      {"parts of 4 GiB", header + std::string("\x01\0\0\0\0", 5) + "\xff\xff\xff\xff",
       damaged(22, "a block that says it is impossibly long")},
      {"a count too many", header + end_of(1),
       damaged(22, "the end block tells of 1 accesses, but 0 came before it")},
      {"a short end", header + frame(2, "abcd", ""), damaged(22, "the end block has an impossible length")},
      {"an end with parts", header + frame(2, little_endian(0, 8), "x"),
       damaged(22, "the end block has an impossible length")},
      {"bytes behind the end", header + end_of(0) + "x", damaged(43, "more bytes after the end block")},
      {"a note of 4 GiB", header.substr(0, 14) + "\xff\xff\xff\xff",
       damaged(0, "the header says that its note is impossibly long")},
      {"version 0", with_crc(header.substr(0, 10) + std::string(8, '\0')) + end_of(0),
       damaged(0, "the header has a version or a flag that does not exist")},
      {"an unknown flag", with_crc(header.substr(0, 12) + "\x02" + std::string(5, '\0')) + end_of(0),
       damaged(0, "the header has a version or a flag that does not exist")},
      {"a bell in the note", with_crc(header.substr(0, 14) + little_endian(1, 4) + "\a") + end_of(0),
       damaged(0, "the header has a note with a control character, expected none but newline and tab")},
  };
  for (const Forgery& forgery : forgeries) {
    INFO(forgery.claim);
    CHECK(outcome_of(forgery.bytes).message == forgery.message);
  }
}

TEST_CASE("mutated blocks with valid CRCs never harm the reader", "[traffic]") {
  // Half of the mutants keep their CRCs right, so that the decoder itself is reached. Run it under the
  // sanitizers.
  constexpr std::uint64_t seed = 20240611;
  INFO("seed " << seed);
  SplitMix64 random(seed);
  std::size_t refused = 0, accepted = 0;
  for (int round = 0; round < 3000; ++round) {
    std::string ops, addresses, values, order;
    const std::uint32_t count = 1 + random.below(40);
    const auto fill = [&random](std::string& column, std::uint32_t bytes) {
      for (std::uint32_t i = 0; i < bytes; ++i) {
        column += static_cast<char>(random.below(3) == 0 ? random.below(256) : random.below(4));
      }
    };
    fill(ops, count + random.below(2));
    fill(addresses, count + random.below(4));
    fill(values, random.below(2 * count + 1));
    const Outcome outcome = outcome_of(file_of(static_cast<int>(count), ops, addresses, values));
    ++(outcome.message == "no error" ? accepted : refused);
    for (const Access& access : outcome.accesses) {
      REQUIRE(access.initiator < most_initiators);
      REQUIRE((access.size >= 1 && access.size <= largest_access));
      REQUIRE(access.address <= 0 - std::uint64_t{access.size});
      if (access.has_value) REQUIRE((access.size == 8 || access.value >> (8 * access.size) == 0));
    }
  }
  CHECK(refused > 1000);
}

TEST_CASE("mutated files of every form never harm the reader", "[traffic]") {
  constexpr std::uint64_t seed = 977;
  INFO("seed " << seed);
  SplitMix64 random(seed);
  for (const std::string name : {"r.csv", "r.ear", "r.csv.gz", "r.ear.zst"}) {
    TemporaryFolder folder;
    write_all(folder.file(name), random_accesses(3, 200));
    const std::string whole = read_file(folder.file(name));
    std::size_t refused = 0;
    for (int round = 0; round < 500; ++round) {
      std::string mutant = whole;
      for (std::uint32_t change = random.below(4) + 1; change > 0; --change) {
        const std::size_t place = random.below(static_cast<std::uint32_t>(mutant.size()));
        switch (random.below(4)) {
          case 0:
            mutant[place] = static_cast<char>(random.below(256));
            break;
          case 1:
            mutant.erase(place, random.below(8));
            break;
          case 2:
            mutant.insert(place, mutant.substr(random.below(static_cast<std::uint32_t>(mutant.size())), 8));
            break;
          case 3:
            mutant.resize(place + 1);
            break;
        }
      }
      write_file(folder.file("mutant"), mutant);
      refused += message_of([&] { read_all(folder.file("mutant")); }) != "no error";
    }
    INFO(name);
    CHECK(refused > 400);
  }
}

}  // namespace
}  // namespace earshot
