// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <catch2/catch.hpp>

#include "earshot/traffic/pattern.h"
#include "traffic/recording_files.h"

namespace earshot {
namespace {

const std::vector<std::string> forms = {"r.csv", "r.csv.gz", "r.csv.zst", "r.ear", "r.ear.gz", "r.ear.zst"};

TEST_CASE("every form and compression gives back what was written, and `only` what is that initiator's",
          "[traffic]") {
  for (std::uint64_t seed = 1; seed <= 8; ++seed) {
    INFO("seed " << seed);
    const std::vector<Access> accesses = random_accesses(seed, 700 * seed);
    for (const std::string& form : forms) {
      INFO(form);
      TemporaryFolder folder;
      write_all(folder.file(form), accesses);
      CHECK(read_all(folder.file(form)) == accesses);
      for (const std::uint32_t only : {0u, 1u, 5u, 63u}) {
        CHECK(read_all(folder.file(form), only) == those_of(only, accesses));
      }
    }
  }
}

TEST_CASE("recordings of several blocks, with initiators that come and go, survive the binary form",
          "[traffic]") {
  std::vector<Access> accesses = random_accesses(21, 200'000);
  for (std::size_t i = 0; i < 70'000; ++i) accesses[i].initiator %= 2;  // the first block has two
  for (std::size_t i = 70'000; i < 140'000; ++i)
    accesses[i].initiator = 40;  // the second nearly only another
  TemporaryFolder folder;
  write_all(folder.file("r.ear"), accesses);
  CHECK(read_all(folder.file("r.ear")) == accesses);
  for (const std::uint32_t only : {0u, 1u, 3u, 40u}) {
    CHECK(read_all(folder.file("r.ear"), only) == those_of(only, accesses));
  }
}

TEST_CASE("a block boundary loses and adds nothing", "[traffic]") {
  for (const std::size_t count : {0u, 1u, 65535u, 65536u, 65537u, 131072u}) {
    INFO(count << " accesses");
    const std::vector<Access> accesses = random_accesses(count, count);
    TemporaryFolder folder;
    write_all(folder.file("r.ear"), accesses);
    CHECK(read_all(folder.file("r.ear")) == accesses);
    CHECK(read_all(folder.file("r.ear"), 0) == those_of(0, accesses));
  }
}

TEST_CASE("notes survive every form", "[traffic]") {
  for (const std::string text :
       {"", "one line", "two\nlines", "\n", "ends with one\n", " blanks \t\n\n # order: exact"}) {
    for (const bool exact : {true, false}) {
      for (const std::string& form : forms) {
        INFO(form << ": " << text);
        TemporaryFolder folder;
        RecordingNotes notes;
        notes.text = text;
        notes.exact_order = exact;
        write_all(folder.file(form), {}, notes);
        const auto reader = open_recording(folder.file(form));
        CHECK(reader->notes().text == text);
        CHECK(reader->notes().exact_order == exact);
      }
    }
  }
}

TEST_CASE("a recording is the same bytes every time it is written", "[traffic]") {
  const std::vector<Access> accesses = random_accesses(4, 100'000);
  for (const std::string& form : forms) {
    TemporaryFolder folder;
    write_all(folder.file("1" + form), accesses);
    write_all(folder.file("2" + form), accesses);
    CHECK(read_file(folder.file("1" + form)) == read_file(folder.file("2" + form)));
  }
}

TEST_CASE("conversion copies accesses and notes between any two forms", "[traffic]") {
  const std::vector<Access> accesses = random_accesses(9, 3000);
  RecordingNotes notes;
  notes.text = "kept";
  notes.exact_order = false;
  for (const std::string& from : forms) {
    TemporaryFolder folder;
    write_all(folder.file(from), accesses, notes);
    for (const std::string& to : forms) {
      CHECK(convert_recording(folder.file(from), folder.file("to-" + to)) == accesses.size());
      CHECK(read_all(folder.file("to-" + to)) == accesses);
      CHECK(open_recording(folder.file("to-" + to))->notes().text == "kept");
      CHECK_FALSE(open_recording(folder.file("to-" + to))->notes().exact_order);
    }
  }
}

TEST_CASE("a conversion onto itself or of a broken recording leaves all files as they were", "[traffic]") {
  TemporaryFolder folder;
  const std::string text = "initiator,op,address,size\n0,read,0,4\n0,read,0,0\n";
  write_file(folder.file("r.csv"), text);
  write_file(folder.file("r.ear"), "before");
  std::filesystem::create_symlink("r.csv", folder.file("same.csv"));
  for (const char* name : {"r.csv", "same.csv"}) {
    CHECK(message_of([&] { convert_recording(folder.file("r.csv"), folder.file(name)); }) ==
          std::string(name) + ": is the recording to convert, expected another name for the copy");
  }
  CHECK(message_of([&] { convert_recording(folder.file("r.csv"), folder.file("r.ear")); }) ==
        "r.csv:3: size '0', expected 1 to 4096");
  CHECK(folder.names() == std::vector<std::string>{"r.csv", "r.ear", "same.csv"});
  CHECK(read_file(folder.file("r.csv")) == text);
  CHECK(read_file(folder.file("r.ear")) == "before");
}

TEST_CASE("an access that no recording may hold is refused and left out, and the writer goes on",
          "[traffic]") {
  Access good;
  good.size = 4;
  struct Bad {
    Access access;
    const char* message;
  };
  const Bad bad[] = {
      {{64, AccessOp::read, false, 4, 0, 0}, "initiator 64, expected 0 to 63"},
      {{0, AccessOp::read, false, 0, 0, 0}, "size 0, expected 1 to 4096"},
      {{0, AccessOp::read, false, 4097, 0, 0}, "size 4097, expected 1 to 4096"},
      {{0, AccessOp::read, false, 2, ~std::uint64_t{0}, 0},
       "address 0xffffffffffffffff with size 2 goes past the last byte of the address space, expected at "
       "most "
       "0xfffffffffffffffe"},
      {{0, AccessOp::write, true, 9, 0, 1}, "a value with size 9, expected a value only with sizes up to 8"},
      {{0, AccessOp::write, true, 2, 0, 0x10000}, "value 0x10000 with size 2, expected at most 0xffff"},
  };
  for (const std::string& form : forms) {
    TemporaryFolder folder;
    const auto writer = create_recording(folder.file(form), {});
    writer->write(good);
    for (const Bad& one : bad) {
      CHECK(message_of([&] { writer->write(one.access); }) == form + ": access 1: " + one.message);
    }
    writer->write(good);
    writer->finish();
    CHECK(read_all(folder.file(form)) == std::vector<Access>{good, good});
  }
}

TEST_CASE("notes that no recording may hold are refused", "[traffic]") {
  TemporaryFolder folder;
  RecordingNotes notes;
  notes.text = "a\rb";
  CHECK(message_of([&] { create_recording(folder.file("r.ear"), notes); }) ==
        "r.ear: a note with a control character, expected none but newline and tab");
  notes.text = std::string(32769, 'x');
  CHECK(message_of([&] { create_recording(folder.file("r.csv"), notes); }) ==
        "r.csv: a note of 32769 bytes, expected at most 32768");
  CHECK(folder.names().empty());
  notes.text = std::string(32768, '\n');
  for (const std::string& form : forms) {
    write_all(folder.file(form), {}, notes);
    CHECK(open_recording(folder.file(form))->notes().text == notes.text);
  }
}

TEST_CASE("a regular pattern takes five bytes an access in the binary form, and a tenth of one with zstd",
          "[traffic]") {
  PatternConfig config;
  config.kind = "producer-consumer";
  config.accesses = 50'000;
  TemporaryFolder folder;
  for (const char* form : {"r.ear", "r.ear.zst"}) {
    const auto pattern = make_pattern(config);
    const auto writer = create_recording(folder.file(form), {});
    for (Access access; pattern->next(access);) writer->write(access);
    writer->finish();
  }
  CHECK(std::filesystem::file_size(folder.file("r.ear")) <= 200'000 * 5);
  CHECK(std::filesystem::file_size(folder.file("r.ear.zst")) <= 200'000 / 10);
}

}  // namespace
}  // namespace earshot
