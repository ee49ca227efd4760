// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>

#include "traffic/recording_files.h"

namespace earshot {
namespace {

std::vector<Access> accesses_in(const std::string& text) {
  TemporaryFolder folder;
  write_file(folder.file("r.csv"), text);
  return read_all(folder.file("r.csv"));
}

std::string error_in(const std::string& text) {
  TemporaryFolder folder;
  write_file(folder.file("r.csv"), text);
  return message_of([&] { read_all(folder.file("r.csv")); });
}

const std::string header = "initiator,op,address,size,value\n";

std::string error_in_row(const std::string& row) {
  return error_in(header + row + "\n");
}

Access access_of(std::uint32_t initiator, AccessOp op, std::uint64_t address, std::uint32_t size) {
  Access access;
  access.initiator = initiator;
  access.op = op;
  access.address = address;
  access.size = size;
  return access;
}

Access access_of(std::uint32_t initiator, AccessOp op, std::uint64_t address, std::uint32_t size,
                 std::uint64_t value) {
  Access access = access_of(initiator, op, address, size);
  access.has_value = true;
  access.value = value;
  return access;
}

TEST_CASE("a text recording's numbers are decimal or hexadecimal and its values may be left out",
          "[traffic]") {
  CHECK(accesses_in(header + "0,read,4096,4,17\n"
                             "63,write,0xFFFFFFFFFFFFFFF8,8,0xffffffffffffffff\n"
                             "0x2,replace,0X10,0x1000,\n"
                             "3,read,0,1\n") ==
        std::vector<Access>{access_of(0, AccessOp::read, 4096, 4, 17),
                            access_of(63, AccessOp::write, 0xfffffffffffffff8, 8, 0xffffffffffffffff),
                            access_of(2, AccessOp::replace, 16, 4096), access_of(3, AccessOp::read, 0, 1)});
}

TEST_CASE("comments, blank lines, blanks around fields, a byte-order mark and carriage returns are skipped",
          "[traffic]") {
  CHECK(accesses_in("\xef\xbb\xbf# a comment\r\n\r\n" + header +
                    "# another\r\n"
                    "   \r\n"
                    " 1 , write ,\t0x20 , 2 , 0x30 # the first\r\n"
                    "1,read,0x20,2# the second") ==
        std::vector<Access>{access_of(1, AccessOp::write, 32, 2, 48), access_of(1, AccessOp::read, 32, 2)});
}

TEST_CASE("columns are found by name and others ignored, in the header and beyond it", "[traffic]") {
  CHECK(accesses_in("time,size,address,op,initiator,place\n"
                    "17,4,0x100,write,5,main.c\n"
                    "18,4,0x104,read,6\n") ==
        std::vector<Access>{access_of(5, AccessOp::write, 256, 4), access_of(6, AccessOp::read, 260, 4)});
  CHECK(accesses_in(header + "0,write,0,4,9,more,and more\n") ==
        std::vector<Access>{access_of(0, AccessOp::write, 0, 4, 9)});
}

TEST_CASE("a malformed row is refused with its line and what was expected", "[traffic]") {
  const std::pair<const char*, const char*> rows[] = {
      {"0,read,0", "r.csv:2: 3 columns, expected at least 4 as in the header"},
      {"0", "r.csv:2: 1 column, expected at least 4 as in the header"},
      {"64,read,0,4", "r.csv:2: initiator '64', expected 0 to 63"},
      {"-1,read,0,4", "r.csv:2: initiator '-1', expected a decimal or 0x-hex number"},
      {"0,raed,0,4", "r.csv:2: op 'raed', expected read, write or replace, did you mean 'read'?"},
      {"0,Write,0,4", "r.csv:2: op 'Write', expected read, write or replace, did you mean 'write'?"},
      {"0,fetch,0,4", "r.csv:2: op 'fetch', expected read, write or replace"},
      {"0,,0,4", "r.csv:2: op '', expected read, write or replace"},
      {"0,compare-and-swap,0,4",
       "r.csv:2: op 'compare-and-swap' is an atomic and not supported yet, expected read, write or replace"},
      {"0,read,12z,4", "r.csv:2: address '12z', expected a decimal or 0x-hex number"},
      {"0,read,0x,4", "r.csv:2: address '0x', expected a decimal or 0x-hex number"},
      {"0,read,,4", "r.csv:2: address '', expected a decimal or 0x-hex number"},
      {"0,read,ff,4", "r.csv:2: address 'ff', expected a decimal or 0x-hex number"},
      {"0,read,0x10000000000000000,4",
       "r.csv:2: address '0x10000000000000000', expected a number below 2^64"},
      {"0,read,0xfffffffffffffffd,4",
       "r.csv:2: address 0xfffffffffffffffd with size 4 goes past the last byte of the address space, "
       "expected at most "
       "0xfffffffffffffffc"},
      {"0,read,0,0", "r.csv:2: size '0', expected 1 to 4096"},
      {"0,read,0,4097", "r.csv:2: size '4097', expected 1 to 4096"},
      {"0,read,0,4294967297", "r.csv:2: size '4294967297', expected 1 to 4096"},
      {"0,write,0,4,1.5", "r.csv:2: value '1.5', expected a decimal or 0x-hex number"},
      {"0,write,0,16,1", "r.csv:2: a value with size 16, expected a value only with sizes up to 8"},
      {"0,write,0,1,256", "r.csv:2: value 0x100 with size 1, expected at most 0xff"},
      {"0,write,0,7,0x100000000000000",
       "r.csv:2: value 0x100000000000000 with size 7, expected at most 0xffffffffffffff"},
      {"0,\x01\x02 0123456789012345678901234567890123456789,0,4",
       "r.csv:2: op '?? 0123456789012345678901234567890123456...', expected read, write or replace"},
  };
  for (const auto& [row, message] : rows) CHECK(error_in_row(row) == message);
}

TEST_CASE("lines are counted with comments and blank ones, and the rows before a bad one are still read",
          "[traffic]") {
  TemporaryFolder folder;
  write_file(folder.file("r.csv"), "# one\n\n" + header + "0,read,0,4\n# five\n0,read,0,5000\n0,read,8,4\n");
  const auto reader = open_recording(folder.file("r.csv"));
  Access access;
  REQUIRE(reader->next(access));
  CHECK(access == access_of(0, AccessOp::read, 0, 4));
  CHECK(message_of([&] { reader->next(access); }) == "r.csv:6: size '5000', expected 1 to 4096");
  CHECK_FALSE(reader->next(access));
}

TEST_CASE("a text without our header is refused", "[traffic]") {
  const std::pair<std::string, const char*> texts[] = {
      {"", "r.csv:1: no header before the end of the file, expected initiator,op,address,size,value"},
      {"# nothing\n\n",
       "r.csv:2: no header before the end of the file, expected initiator,op,address,size,value"},
      {"0,read,0,4,1\n",
       "r.csv:1: header '0,read,0,4,1' without the column 'initiator', expected "
       "initiator,op,address,size,value"},
      {"initiator,op,address,value\n",
       "r.csv:1: header 'initiator,op,address,value' without the column 'size', expected "
       "initiator,op,address,size,value"},
      {"initiator,op,op,address,size\n",
       "r.csv:1: column 'op' twice, expected the header initiator,op,address,size,value"},
      {std::string("\x7f\x45LF\0\1\2\n", 8),
       "r.csv:1: neither text nor the binary form, expected a recording: text begins with the header "
       "initiator,op,address,size,value"},
  };
  for (const auto& [text, message] : texts) CHECK(error_in(text) == message);
}

TEST_CASE("a line that never ends is refused instead of filling memory", "[traffic]") {
  const char* message =
      "r.csv:2: a line longer than 65536 bytes, expected a row of initiator,op,address,size,value";
  CHECK(error_in_row(std::string(65537, ' ')) == message);
  CHECK(error_in_row(std::string(1000000, ' ')) == message);
  CHECK(error_in_row(std::string(65536, ' ')) == "no error");
}

TEST_CASE("a text recording's notes stand in its leading comments", "[traffic]") {
  const auto notes_in = [](const std::string& text) {
    TemporaryFolder folder;
    write_file(folder.file("r.csv"), text);
    return open_recording(folder.file("r.csv"))->notes();
  };
  const RecordingNotes notes = notes_in(
      "# order: approximate\n# any comment\n# note: one\r\n# note:\n#note: not this\n# note:  two \n" +
      header + "# note: too late\n# order: exact\n");
  CHECK_FALSE(notes.exact_order);
  CHECK(notes.text == "one\n\n two ");
  CHECK(notes_in(header).exact_order);
  CHECK(notes_in("# order: exact\n" + header).text.empty());
  CHECK(error_in("# order: roughly\n" + header) == "r.csv:1: order 'roughly', expected exact or approximate");
  CHECK(error_in("# note: a\x1b[31m\n" + header) ==
        "r.csv:1: a note with a control character, expected none but newline and tab");
  CHECK(error_in("# note: a\n# note: " + std::string(32767, 'x') + "\n" + header) ==
        "r.csv:2: a note of 32769 bytes, expected at most 32768");
}

TEST_CASE("a text recording is written as documented", "[traffic]") {
  TemporaryFolder folder;
  RecordingNotes notes;
  notes.exact_order = false;
  notes.text = "a ring\nseed 7";
  write_all(folder.file("r.csv"),
            {access_of(0, AccessOp::read, 0x1000, 64), access_of(12, AccessOp::write, 0, 1, 255)}, notes);
  CHECK(read_file(folder.file("r.csv")) ==
        "# order: approximate\n# note: a ring\n# note: seed 7\ninitiator,op,address,size,value\n"
        "0,read,0x1000,64,\n12,write,0x0,1,0xff\n");
}

}  // namespace
}  // namespace earshot
