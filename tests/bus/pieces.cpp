// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/pieces.h"

#include <array>
#include <catch2/catch.hpp>
#include <numeric>
#include <random>

using namespace earshot;

namespace {

struct Payload : tlm::tlm_generic_payload {
  Payload(std::uint64_t address, unsigned length, unsigned width, std::vector<std::uint8_t> enable = {})
      : data(length), enables(std::move(enable)) {
    set_command(tlm::TLM_WRITE_COMMAND);
    set_address(address);
    set_data_ptr(data.data());
    set_data_length(length);
    set_streaming_width(width);
    set_byte_enable_ptr(enables.empty() ? nullptr : enables.data());
    set_byte_enable_length(static_cast<unsigned>(enables.size()));
  }
  std::vector<std::uint8_t> data, enables;
};

// "line+offset:length" of each, lines of 32 bytes.
std::string text_of(const Payload& payload) {
  std::string text;
  Pieces pieces(payload, 32);
  for (Piece piece; pieces.next(piece);)
    text += (text.empty() ? "" : " ") + std::to_string(piece.line) + "+" + std::to_string(piece.offset) +
            ":" + std::to_string(piece.length);
  return text;
}

constexpr std::uint8_t on = TLM_BYTE_ENABLED, off = TLM_BYTE_DISABLED;

}  // namespace

TEST_CASE("an access within a line is one piece, one over lines a piece a line", "[cache]") {
  CHECK(text_of(Payload(0x44, 4, 4)) == "64+4:4");
  CHECK(text_of(Payload(0x40, 32, 32)) == "64+0:32");
  CHECK(text_of(Payload(0x5f, 2, 2)) == "64+31:1 96+0:1");
  CHECK(text_of(Payload(0x50, 70, 70)) == "64+16:16 96+0:32 128+0:22");
  CHECK(text_of(Payload(0x50, 70, 1000)) ==
        "64+16:16 96+0:32 128+0:22");  // a width beyond the length: no streaming
}

TEST_CASE("streaming repeats the first addresses", "[cache]") {
  CHECK(text_of(Payload(0x44, 12, 4)) == "64+4:4 64+4:4 64+4:4");
  CHECK(text_of(Payload(0x44, 10, 4)) == "64+4:4 64+4:4 64+4:2");
  CHECK(text_of(Payload(0x5e, 8, 4)) == "64+30:2 96+0:2 64+30:2 96+0:2");
}

TEST_CASE("pieces that byte enables disable altogether are left out, half enabled ones are not", "[cache]") {
  CHECK(text_of(Payload(0x5e, 4, 4, {on, on, off, off})) == "64+30:2");
  CHECK(text_of(Payload(0x5e, 4, 4, {off, off, off, on})) == "96+0:2");
  CHECK(text_of(Payload(0x5e, 4, 4, {off})) == "");
  CHECK(text_of(Payload(0x5e, 8, 4, {on, off, off, off, off, off, off, off})) == "64+30:2");
  CHECK(text_of(Payload(0x40, 8, 8, {off, on})) == "64+0:8");  // enables shorter than the data repeat
}

TEST_CASE("the last bytes of the address space are an access like others", "[cache]") {
  const std::uint64_t last = ~std::uint64_t{0};
  CHECK(text_of(Payload(last - 3, 4, 4)) == std::to_string(last - 31) + "+28:4");
  CHECK(text_of(Payload(last - 35, 36, 36)) ==
        std::to_string(last - 63) + "+28:4 " + std::to_string(last - 31) + "+0:32");
}

TEST_CASE("every byte goes where the standard says, for any access", "[cache]") {
  std::mt19937 random(11);  // seed
  for (int n = 0; n < 2000; ++n) {
    const unsigned length = 1 + static_cast<unsigned>(random() % 150),
                   width = 1 + static_cast<unsigned>(random() % 160);
    const std::uint64_t address = random() % 200;
    std::vector<std::uint8_t> enables(random() % 3 == 0 ? 1 + random() % length : 0);
    for (auto& enable : enables) enable = random() % 3 == 0 ? on : off;
    Payload payload(address, length, width, enables);
    std::iota(payload.data.begin(), payload.data.end(), std::uint8_t{0});
    // IEEE 1666-2011, 14.12 and 14.13: byte i goes to address + i mod width, if enables[i mod their number]
    // says so.
    std::array<int, 512> expected{}, got{};
    expected.fill(-1);
    got.fill(-1);
    for (unsigned i = 0; i < length; ++i)
      if (enables.empty() || enables[i % enables.size()] == on)
        expected[address + i % width] = payload.data[i];
    Pieces pieces(payload, 32);
    for (Piece piece; pieces.next(piece);) {
      REQUIRE(piece.write);
      REQUIRE(piece.offset + piece.length <= 32);
      for (unsigned i = 0; i < piece.length; ++i)
        if (piece.byte_enable == nullptr || piece.byte_enable[i] == on)
          got[piece.line + piece.offset + i] = piece.data[i];
    }
    REQUIRE(got == expected);
  }
}
