// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Runs an example platform whose sc_main was renamed, and prints what there is to compare, a line each, begun
// by '@'.
//   CLIENT original | CLIENT instead|before|uncached PROTOCOL annotated|arbitrated
#include <algorithm>
#include <cstdio>
#include <cstdlib>
#include <iostream>
#include <map>
#include <sstream>

#include "outside/clients/insertion.h"

extern "C" int example_main(int argc, char* argv[]);

namespace earshot::test {
namespace {

std::map<std::uint64_t, std::uint8_t>
    in_memory;  // what the targets were given; their memories begin as zeros

std::string one_line(const std::string& text) {
  std::istringstream words(text);
  std::string line;
  for (std::string word; words >> word;) line += (line.empty() ? "" : " ") + word;
  return line;
}

// `enables`: null, or a flag a byte, repeated after `enable_length`. A disabled byte's value means nothing.
std::string read_text(std::uint64_t address, const std::uint8_t* data, unsigned length,
                      const std::uint8_t* enables = nullptr, unsigned enable_length = 0) {
  std::ostringstream text;
  text << std::hex << address << ':';
  for (unsigned i = 0; i < length; ++i) {
    if (enables == nullptr || enables[i % enable_length] == TLM_BYTE_ENABLED)
      text << ' ' << static_cast<unsigned>(data[i]);
    else
      text << " --";
  }
  return text.str();
}

unsigned direct_accesses = 0;

// An access by direct memory passes no hop; dmi_memory.cpp reports it.
void hear_direct_access(const std::string& text) {
  if (text.find("COMMAND:") == std::string::npos) return;
  ++direct_accesses;
  unsigned initiator = 0, data = 0;
  unsigned long long address = 0;
  if (std::sscanf(text.c_str(), "%*[^I]ID: %u COMMAND: READ Length: 04 Addr: 0x%llx Data: 0x%x", &initiator,
                  &address, &data) != 3)
    return;
  const std::uint8_t bytes[4] = {static_cast<std::uint8_t>(data), static_cast<std::uint8_t>(data >> 8),
                                 static_cast<std::uint8_t>(data >> 16),
                                 static_cast<std::uint8_t>(data >> 24)};
  client_run().reads.at(initiator - 101).push_back(read_text(address, bytes, 4));
}

void hear(const sc_core::sc_report& report, const sc_core::sc_actions& actions) {
  const std::string text = report.get_msg();
  if (report.get_severity() == sc_core::SC_INFO) {
    if (text.find("####") != std::string::npos)
      client_run().verdicts.push_back(one_line(text.substr(text.find('\n') + 1)));
    if (std::string(report.get_msg_type()) == "dmi_memory.cpp") hear_direct_access(one_line(text));
    return;
  }
  client_run().verdicts.push_back(std::string("severity ") + std::to_string(report.get_severity()) + ": " +
                                  report.get_msg_type() + ": " + one_line(text.substr(text.find('\n') + 1)));
  sc_core::sc_report_handler::default_handler(report, actions);
}

}  // namespace

ClientRun& client_run() {
  static ClientRun run;
  return run;
}

BaseProtocolObserver<>& ClientRun::watch(const std::string& name) {
  hops.push_back(std::make_unique<BaseProtocolObserver<>>(("hop_of_" + name).c_str(), name));
  return *hops.back();
}

void ClientRun::watch_initiator(BaseProtocolObserver<>& hop, std::size_t number) {
  reads.resize(std::max(reads.size(), number + 1));
  struct Pending {
    const tlm::tlm_generic_payload* payload;
    std::size_t place;
    std::uint64_t address;
  };
  hop.on_access = [this, number, pending = std::vector<Pending>()](const tlm::tlm_generic_payload& payload,
                                                                   bool began) mutable {
    if (!payload.is_read()) return;
    if (began) {
      pending.push_back({&payload, reads[number].size(), payload.get_address()});
      reads[number].push_back("never answered");
      return;
    }
    for (auto at = pending.begin(); at != pending.end(); ++at) {
      if (at->payload != &payload) continue;
      reads[number][at->place] =
          payload.is_response_ok()
              ? read_text(at->address, payload.get_data_ptr(), payload.get_data_length(),
                          payload.get_byte_enable_ptr(), payload.get_byte_enable_length())
              : payload.get_response_string();
      pending.erase(at);
      return;
    }
  };
}

void ClientRun::watch_memory(BaseProtocolObserver<>& hop, std::uint64_t base) {
  hop.on_access = [base](const tlm::tlm_generic_payload& payload, bool began) {
    if (began || !payload.is_write() || !payload.is_response_ok()) return;
    for (unsigned i = 0; i < payload.get_data_length(); ++i)
      if (payload.get_byte_enable_ptr() == nullptr ||
          payload.get_byte_enable_ptr()[i % payload.get_byte_enable_length()] == TLM_BYTE_ENABLED)
        in_memory[base + payload.get_address() + i] = payload.get_data_ptr()[i];
  };
}

void ClientRun::print() const {
  for (const std::string& verdict : verdicts) std::cout << "@verdict " << verdict << '\n';
  for (std::size_t i = 0; i < reads.size(); ++i)
    for (const std::string& read : reads[i]) std::cout << "@read " << i << ' ' << read << '\n';
  for (const auto& hop : hops) {
    for (const BrokenRule& broken : hop->rules().broken())
      std::cout << (broken.by == Side::initiator ? "@initiator " : "@target ") << broken.hop << ' '
                << name_of(broken.rule) << ": " << broken.text << '\n';
    if (hop->rules().in_flight() != 0) std::cout << "@unfinished " << hop->name() << '\n';
  }
  std::cout << "@direct " << direct_accesses << '\n';
  if (monitor == nullptr || caches.empty()) return;
  CacheTotals totals;
  for (const auto& cache : caches) {
    totals.add(cache->totals());
    for (const std::string& law : cache->broken_laws()) std::cout << "@law " << law << '\n';
  }
  for (const std::string& law : snooping_bus->broken_laws()) std::cout << "@law " << law << '\n';
  std::cout << "@cached " << totals.reads + totals.writes << " accesses, " << totals.hits << " hits, "
            << totals.errors << " errors\n@monitored " << monitor->accesses_checked() << '\n';
  monitor->check_memory();
}

namespace {

void choose(int argc, char* argv[]) {
  ClientRun& run = client_run();
  const std::string place = argc > 1 ? argv[1] : "";
  if (place == "original" && argc == 2) return;
  if (argc != 4 || (place != "instead" && place != "before" && place != "uncached")) {
    std::fprintf(stderr, "usage: %s original | instead|before|uncached PROTOCOL annotated|arbitrated\n",
                 argv[0]);
    std::exit(2);
  }
  run.place = place == "before"    ? ClientRun::Place::before
              : place == "instead" ? ClientRun::Place::instead
                                   : ClientRun::Place::uncached;
  run.protocol = argv[2];
  run.timing = std::string(argv[3]) == "arbitrated" ? BusTiming::arbitrated : BusTiming::annotated;
  run.monitor = std::make_unique<CoherenceMonitor>(
      CacheConfig{}.geometry.line_bytes, [](std::uint64_t address, std::uint8_t* to, std::size_t length) {
        for (std::size_t i = 0; i < length; ++i) {
          const auto at = in_memory.find(address + i);
          to[i] = at == in_memory.end() ? std::uint8_t{0} : at->second;
        }
      });
}

}  // namespace
}  // namespace earshot::test

int sc_main(int argc, char* argv[]) {
  earshot::test::choose(argc, argv);
  sc_core::sc_report_handler::set_handler(earshot::test::hear);
  try {
    const int status = example_main(1, argv);
    earshot::test::client_run().print();
    std::cout.flush();
    // The modules outlive the platform that is bound to them.
    std::_Exit(status);
  } catch (const std::exception& error) {
    std::cout << "@failed " << error.what() << std::endl;
    std::_Exit(1);
  }
}
