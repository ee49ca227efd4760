// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// What the modules make of headers that are not their library's. tests/package compiles a program with such headers.
#include "earshot/version.h"

#include <catch2/catch.hpp>
#include <memory>
#include <string>
#include <systemc>

#include "earshot/bus/snooping_bus.h"
#include "earshot/cache/invalidating_cache.h"
#include "earshot/cache/updating_cache.h"
#include "earshot/dram/dram_controller.h"
#include "earshot/dram/plain_memory.h"
#include "earshot/traffic/non_blocking_player.h"
#include "earshot/traffic/player.h"

namespace earshot {
namespace {

template <typename Module, typename... Arguments>
std::string refusal(HeadersVersion headers, const Arguments&... arguments) {
  try {
    Module module("refused", arguments..., headers);
  } catch (const sc_core::sc_report& report) {
    return std::string(report.get_msg_type()) + " " + report.get_msg();
  }
  return "";
}

TEST_CASE("every module refuses headers of another minor version") {
  const HeadersVersion other{EARSHOT_VERSION_NUMBER + 100};
  const DramConfig dram;
  const sc_core::sc_time no_time;
  const auto refuses = [](const std::string& text) {
    INFO(text);
    return text.find("/earshot/version refused: compiled with the headers of Earshot ") == 0 &&
           text.find("the library linked is " EARSHOT_VERSION) != std::string::npos;
  };
  CHECK(refuses(refusal<SnoopingBus>(other, SnoopingBusConfig{})));
  CHECK(refuses(refusal<UpdatingCache>(other, CacheConfig{})));
  CHECK(refuses(refusal<InvalidatingCache>(other, CacheConfig{})));
  CHECK(refuses(refusal<PlainMemory>(other, PlainMemoryConfig{})));
  CHECK(refuses(refusal<DramController>(other, dram)));
  CHECK(refuses(refusal<Player>(other, 0u, no_time, PlayerHooks{})));
  CHECK(refuses(refusal<NonBlockingPlayer>(other, 0u, 1u, no_time, PlayerHooks{})));
  CHECK_THROWS_AS(RecordedOrder("order", {}, nullptr, false, {}, other), sc_core::sc_report);
}

TEST_CASE("headers of another patch go with the library") {
  CHECK(!refusal<PlainMemory>(HeadersVersion{EARSHOT_VERSION_NUMBER - 100}, PlainMemoryConfig{}).empty());
  CHECK(refusal<PlainMemory>(HeadersVersion{EARSHOT_VERSION_NUMBER + 1}, PlainMemoryConfig{}).empty());
  CHECK(std::string(version()) == EARSHOT_VERSION);
}

}  // namespace
}  // namespace earshot
