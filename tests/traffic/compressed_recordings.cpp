// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include <sys/resource.h>

#include <catch2/catch.hpp>
#include <csignal>

#include "traffic/recording_files.h"

namespace earshot {
namespace {

const std::string some_rows = "initiator,op,address,size,value\n0,read,0x10,4,\n1,write,0x20,8,0x30\n";
const std::string more_rows = "2,read,0x40,4,\n";

std::string error_reading(const std::string& content) {
  TemporaryFolder folder;
  write_file(folder.file("r"), content);
  return message_of([&] { read_all(folder.file("r")); });
}

std::size_t rows_in(const std::string& content) {
  TemporaryFolder folder;
  write_file(folder.file("r"), content);
  return read_all(folder.file("r")).size();
}

TEST_CASE("compression is recognised by content, whatever the name", "[traffic]") {
  CHECK(rows_in(gzipped(some_rows)) == 2);
  CHECK(rows_in(zstd_compressed(some_rows)) == 2);
  CHECK(rows_in(some_rows) == 2);
}

TEST_CASE("several gzip members or zstd frames are one content", "[traffic]") {
  CHECK(rows_in(gzipped(some_rows) + gzipped("") + gzipped(more_rows)) == 3);
  CHECK(rows_in(zstd_compressed(some_rows) + zstd_compressed("") + zstd_compressed(more_rows)) == 3);
  // RFC 8878, 3.1.2: a skippable frame of three bytes.
  CHECK(rows_in(std::string("\x50\x2a\x4d\x18\x03\0\0\0abc", 11) + zstd_compressed(some_rows)) == 2);
}

TEST_CASE("a compressed file cut at any byte is refused", "[traffic]") {
  for (const std::string& whole : {gzipped(some_rows), zstd_compressed(some_rows)}) {
    for (std::size_t length = 1; length < whole.size(); ++length) {
      INFO("cut to " << length << " of " << whole.size() << " bytes");
      CHECK(error_reading(whole.substr(0, length)) != "no error");
    }
  }
  const std::string gzip = gzipped(some_rows);
  CHECK(error_reading(gzip.substr(0, gzip.size() - 3)) ==
        "r: ends at byte " + std::to_string(gzip.size() - 3) +
            " of the gzip file, expected the rest of the compressed data; the file was cut short, fetch or "
            "make it again");
  const std::string zstd = zstd_compressed(some_rows);
  CHECK(error_reading(zstd.substr(0, zstd.size() - 3)) ==
        "r: ends at byte " + std::to_string(zstd.size() - 3) +
            " of the zstd file, expected the rest of the compressed data; the file was cut short, fetch or "
            "make it again");
}

TEST_CASE("corrupt compressed data are refused with the place", "[traffic]") {
  std::string gzip = gzipped(some_rows);
  gzip[gzip.size() - 8] ^= 1;  // the CRC of the content; RFC 1952, 2.3
  CHECK(error_reading(gzip) ==
        "r: at byte " + std::to_string(gzip.size() - 4) +
            " of the gzip file: corrupt (incorrect data check), expected gzip data; fetch or make "
            "the file again");
  CHECK(error_reading(gzipped(some_rows) + "rest") ==
        "r: at byte " + std::to_string(gzip.size() + 2) +
            " of the gzip file: corrupt (incorrect header check), expected gzip data; fetch or make the file "
            "again");
  std::string zstd = zstd_compressed(some_rows);
  zstd.back() ^= 1;  // the checksum of the content; RFC 8878, 3.1.1
  CHECK_THAT(error_reading(zstd),
             Catch::Matches("r: at byte [0-9]+ of the zstd file: corrupt \\(Restored data doesn't match "
                            "checksum\\), expected zstd data; fetch or make the file again"));
}

TEST_CASE("a file that cannot be opened or read is refused with the reason", "[traffic]") {
  TemporaryFolder folder;
  CHECK(message_of([&] { open_recording(folder.file("none.csv")); }) ==
        "none.csv: cannot be opened: No such file or directory");
  std::filesystem::create_directory(folder.file("folder"));
  CHECK(message_of([&] { open_recording(folder.file("folder")); }) ==
        "folder: cannot be read: Is a directory");
}

TEST_CASE("a target that cannot be written is refused with the reason", "[traffic]") {
  TemporaryFolder folder;
  for (const std::string end : {".csv", ".ear", ".ear.zst", ".csv.gz"}) {
    CHECK(message_of([&] { create_recording(folder.file("none/r" + end), {}); }) ==
          "none/r" + end + ": cannot be created: No such file or directory");
  }
  std::filesystem::create_directory(folder.file("folder"));
  CHECK(message_of([&] { create_recording(folder.file("folder"), {}); }) ==
        "folder: cannot be created: is there and not a regular file; choose another name");
  CHECK(message_of([&] { create_recording("/dev/null", {}); }) ==
        "/dev/null: cannot be created: is there and not a regular file; choose another name");
}

// While it lives, no file of this process grows beyond 'bytes': as on a file system that is full.
class FullDisk {
 public:
  explicit FullDisk(rlim_t bytes) : signal_(std::signal(SIGXFSZ, SIG_IGN)) {
    ::getrlimit(RLIMIT_FSIZE, &limit_);
    rlimit limit = limit_;
    limit.rlim_cur = bytes;
    ::setrlimit(RLIMIT_FSIZE, &limit);
  }
  ~FullDisk() {
    ::setrlimit(RLIMIT_FSIZE, &limit_);
    std::signal(SIGXFSZ, signal_);
  }

 private:
  void (*signal_)(int);
  rlimit limit_{};
};

TEST_CASE("a disk that fills up is reported, and the file that was there before stays", "[traffic]") {
  for (const std::string name : {"r.csv", "r.ear", "r.csv.gz", "r.ear.zst"}) {
    TemporaryFolder folder;
    write_file(folder.file(name), "before");
    std::string message;
    {
      const FullDisk full(10'000);
      message = message_of([&] { write_all(folder.file(name), random_accesses(6, 100'000)); });
    }
    CHECK(message == name + ": cannot be written: File too large");
    CHECK(folder.names() == std::vector<std::string>{name});
    CHECK(read_file(folder.file(name)) == "before");
  }
}

TEST_CASE("a name taken by a folder in the meantime is reported and the temporary goes", "[traffic]") {
  TemporaryFolder folder;
  {
    const auto writer = create_recording(folder.file("r.csv"), {});
    std::filesystem::create_directory(folder.file("r.csv"));
    CHECK(message_of([&] { writer->finish(); }) == "r.csv: cannot be given its name: Is a directory");
  }
  CHECK(folder.names() == std::vector<std::string>{"r.csv"});
}

TEST_CASE("an unfinished writer leaves nothing behind and does not touch a file of that name", "[traffic]") {
  for (const std::string name : {"r.csv", "r.ear", "r.csv.gz", "r.ear.zst"}) {
    TemporaryFolder folder;
    const std::vector<Access> accesses = random_accesses(5, 100000);
    {
      const auto writer = create_recording(folder.file(name), {});
      for (const Access& access : accesses) writer->write(access);
    }
    CHECK(folder.names().empty());
    write_file(folder.file(name), "before");
    {
      const auto writer = create_recording(folder.file(name), {});
      for (const Access& access : accesses) writer->write(access);
      CHECK(read_file(folder.file(name)) == "before");
    }
    CHECK(folder.names() == std::vector<std::string>{name});
    CHECK(read_file(folder.file(name)) == "before");
    write_all(folder.file(name), accesses);
    CHECK(folder.names() == std::vector<std::string>{name});
    CHECK(read_all(folder.file(name)) == accesses);
  }
}

TEST_CASE("a recording written through a symbolic link leaves the link in place", "[traffic]") {
  TemporaryFolder folder;
  write_file(folder.file("real.csv"), "before");
  std::filesystem::create_symlink("real.csv", folder.file("link.csv"));
  write_all(folder.file("link.csv"), {});
  CHECK(std::filesystem::is_symlink(folder.file("link.csv")));
  CHECK(read_all(folder.file("real.csv")).empty());
}

}  // namespace
}  // namespace earshot
