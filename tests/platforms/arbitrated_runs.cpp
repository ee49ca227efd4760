// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Arbitrated timing and DRAM through the command: what the document has, that it adds up, what is a finding.
#include "command_runner.h"

using namespace command_tests;

namespace {

const std::string uniform =
    "--workload.pattern=uniform --workload.order=concurrent --caches.size=1KiB --baseline=off --monitor=on ";
const std::string some = "--workload.accesses=3000 ";
const std::string arbitrated = uniform + some + "--timing=arbitrated ";
const std::string dram = "--memory.kind=dram --memory.channel-width=32 --memory.device-width=16 ";

double real(const Json& json) {
  return json.get<double>();
}
std::uint64_t whole(const Json& json) {
  return json.get<std::uint64_t>();
}

// Every initiator's latencies, by kind and together, are those of all.
void check_kinds(const Json& json) {
  const Json& latency = json["latency"];
  std::uint64_t count = 0;
  double time = 0;
  for (const auto& [name, kind] : latency["kinds"].items()) {
    if (name == "write-back") continue;  // no access's latency
    count += whole(kind["count"]);
    time += real(kind["count"]) * real(kind["mean-ns"]);
    std::uint64_t of_initiators = 0;
    for (const Json& one : json["initiators"]) of_initiators += whole(one["latency"]["kinds"][name]["count"]);
    CHECK(of_initiators == whole(kind["count"]));
    CHECK(real(kind["p50-ns"]) <= real(kind["p95-ns"]));
    CHECK(real(kind["p99-ns"]) <= real(kind["max-ns"]));
  }
  CHECK(count == whole(json["accesses"]["reads"]) + whole(json["accesses"]["writes"]));
  CHECK(time == Approx(real(latency["total-ps"]) / 1000));
  std::uint64_t parts = 0;
  for (const auto& [name, part] : latency["total-parts-ps"].items()) parts += whole(part);
  CHECK(parts == whole(latency["total-ps"]));
}

}  // namespace

TEST_CASE("the kinds of access, and the parts of their latencies, add up in both timings", "[command]") {
  for (const std::string timing : {"annotated", "arbitrated"})
    for (const std::string protocol : {"dirty-owner-update", "dragon", "mesi", "write-through-update"}) {
      INFO(timing << " " << protocol);
      check_kinds(results_of(uniform + some + "--timing=" + timing + " --caches.protocol=" + protocol));
    }
}

TEST_CASE("queues and grants are in the document, and every arrival at the bus is granted or over",
          "[command]") {
  const Json json = results_of(arbitrated + "--caches.protocol=mesi");
  REQUIRE(json["bus"]["queues"].size() == 5);
  const Json& requests = json["bus"]["queues"][0];
  CHECK(requests["name"] == "requests");
  std::uint64_t grants = 0, transactions = 0;
  for (const Json& one : json["bus"]["grants"]) {
    grants += whole(one["grants"]);
    CHECK(real(one["longest-wait-ns"]) >= real(one["mean-wait-ns"]));
  }
  REQUIRE(json["bus"]["grants"].size() == 4);
  for (const auto& [kind, count] : json["bus"]["transactions"].items()) transactions += whole(count);
  CHECK(grants == transactions - whole(json["memory"]["block-writes-at-end"]));
  CHECK(whole(requests["arrivals"]) >= grants);
  // Little's law, on what the document says.
  CHECK(real(requests["mean-present"]) * real(json["elapsed-ns"]) ==
        Approx(real(requests["arrivals"]) * real(requests["mean-stay-ns"])));
  CHECK(json["initiators"][0]["queues"].size() == 3);
  CHECK(json["checks"]["queues-checked"] == 17);
  CHECK(json["checks"]["latencies-checked"] == 12000);
  CHECK(json["findings"].empty());
}

TEST_CASE("annotated timing has no queues and no grants", "[command]") {
  const Json json = results_of(uniform + some);
  CHECK(json["bus"]["queues"].empty());
  CHECK(json["bus"]["grants"].empty());
  CHECK(json["checks"]["queues-checked"] == 0);
}

TEST_CASE("the bottleneck obeys the utilisation law and the asymptotic bound", "[command]") {
  for (const std::string timing : {"annotated", "arbitrated"}) {
    // Think time far above the latencies: nothing waits for anything, so utilisation is N / N* as Denning and Buzen
    // have it, but for the first misses.
    const Json json =
        results_of(uniform + "--workload.think=2us --workload.accesses=1000 --timing=" + timing);
    const Json& bottleneck = json["bottleneck"];
    INFO(bottleneck.dump());
    const double busy = real(bottleneck["utilisation"]);
    CHECK(busy + real(bottleneck["headroom"]) == Approx(1));
    CHECK(busy * real(json["elapsed-ns"]) == Approx(4000 * real(bottleneck["demand-ns"])));
    CHECK(real(bottleneck["initiators-at-work"]) == Approx(4).epsilon(0.01));
    CHECK(busy == Approx(4 / real(bottleneck["initiators-at-saturation"])).epsilon(0.02));
    double most = 0;
    for (const Json& one : bottleneck["resources"]) most = std::max(most, real(one["utilisation"]));
    CHECK(busy == most);
  }
}

TEST_CASE("a connected bus is one resource, and held while memory works", "[command]") {
  const Json json = results_of(arbitrated + "--bus.kind=connected");
  CHECK(json["bottleneck"]["resource"] == "bus");
  CHECK(json["bottleneck"]["resources"].size() == 2);
  CHECK(real(json["bus"]["utilisation"]) > 0.9);
}

TEST_CASE("twice as many initiators as the bound says saturate the bottleneck", "[command]") {
  const Json few = results_of(
      "--workload.pattern=private --workload.lines=256 --workload.accesses=2000 "
      "--workload.order=concurrent --caches.size=1KiB --baseline=off --timing=arbitrated "
      "--workload.think=300ns --caches.count=2");
  CHECK(real(few["bottleneck"]["utilisation"]) < 0.5);
  const int many = static_cast<int>(2 * real(few["bottleneck"]["initiators-at-saturation"]) + 1);
  const Json saturated = results_of(
      "--workload.pattern=private --workload.lines=256 --workload.accesses=2000 "
      "--workload.order=concurrent --caches.size=1KiB --baseline=off "
      "--timing=arbitrated --workload.think=300ns --caches.count=" +
      std::to_string(many));
  CHECK(saturated["bottleneck"]["resource"] == few["bottleneck"]["resource"]);
  CHECK(real(saturated["bottleneck"]["utilisation"]) > 0.97);
}

TEST_CASE("DRAM counts every burst once, and its energy is marked as an estimate", "[command]") {
  const Json json = results_of(arbitrated + dram + "--workload.lines=4096");
  REQUIRE(json["memory"]["dram"].size() == 1);
  const Json& memory = json["memory"]["dram"][0];
  INFO(memory.dump(1));
  CHECK(memory["grade"] == "ddr4-2400t");
  CHECK(memory["channel-bits"] == 32);
  const std::uint64_t bursts = whole(memory["read-bursts"]) + whole(memory["write-bursts"]);
  CHECK(bursts == whole(memory["row-hits"]) + whole(memory["row-closed"]) + whole(memory["row-conflicts"]));
  // A line is a burst; what was served from or merged into queued writes cost none.
  CHECK(bursts + whole(memory["reads-from-queue"]) + whole(memory["writes-merged"]) ==
        whole(json["memory"]["block-reads"]) + whole(json["memory"]["block-writes"]) -
            whole(json["memory"]["block-writes-at-end"]));
  CHECK(memory["energy"]["estimated"] == true);
  CHECK(memory["energy"]["method"].get<std::string>().find("an estimate") == 0);
  const Json& energy = memory["energy"];
  CHECK(real(energy["total-nj"]) ==
        Approx(real(energy["activate-nj"]) + real(energy["read-nj"]) + real(energy["write-nj"]) +
               real(energy["refresh-nj"]) + real(energy["background-nj"])));
  const Json unknown = results_of(arbitrated + "--memory.kind=dram");
  CHECK(unknown["memory"]["dram"][0]["energy"]["estimated"] == false);
  CHECK(unknown["memory"]["dram"][0]["energy"]["method"].get<std::string>().find("no estimate") == 0);
}

TEST_CASE("every grade, scheduling, row policy and arbiter plays without a violation", "[command]") {
  std::vector<std::string> variants;
  for (const std::string grade :
       {"ddr3-1600k", "ddr4-2400r", "ddr4-2400t", "ddr4-3200aa", "lpddr4-3200", "ddr5-4800b"})
    variants.push_back("--memory.kind=dram --memory.grade=" + grade);
  for (const std::string scheduling : {"first-ready", "first-come", "one-at-a-time"})
    for (const std::string rows : {"open", "closed", "idle-timeout"})
      variants.push_back("--memory.kind=dram --memory.scheduling=" + scheduling +
                         " --memory.row-policy=" + rows);
  for (const std::string arbitration :
       {"first-come", "round-robin", "fixed-priority", "time-slots", "weighted-round-robin", "lottery"})
    for (const std::string kind : {"split", "connected"})
      variants.push_back("--bus.turnaround-cycles=1 --bus.kind=" + kind +
                         " --bus.arbitration=" + arbitration);
  variants.push_back(
      "--memory.kind=dram --memory.channels=2 --memory.ranks=2 --memory.bank-hash=on "
      "--memory.refresh=off --memory.frontend=4 --memory.backend=3");
  variants.push_back("--memory.kind=dram --memory.grade=lpddr4-3200 --memory.refresh=per-bank");
  for (const std::string& variant : variants) {
    const Outcome outcome = earshot("simulate --quiet " + arbitrated + "--workload.lines=512 " + variant);
    INFO(variant << "\n" << outcome.out);
    CHECK(outcome.status == 0);
  }
}

TEST_CASE("several accesses in flight are coherent, and quicker than one", "[command]") {
  // One initiator that only waits for memory: with four accesses in flight it waits a quarter of the time, or less
  // where they share a line.
  const std::string run =
      "--workload.pattern=private --workload.accesses=3000 --workload.lines=4096 --caches.count=1 "
      "--workload.write-percent=0 --workload.order=concurrent --caches.size=1KiB --baseline=off "
      "--monitor=on --timing=arbitrated " +
      dram;
  const Json one = results_of(run);
  const Json four = results_of(run + "--workload.outstanding=4");
  CHECK(four["accesses"]["reads"] == one["accesses"]["reads"]);
  CHECK(four["checks"]["line-accesses-checked"] == 3000);
  CHECK(real(four["elapsed-ns"]) < 0.5 * real(one["elapsed-ns"]));
  CHECK(one["initiators"][0]["queues"][0]["most"] == 1);
  CHECK(four["initiators"][0]["queues"][0]["most"] == 4);
  check_kinds(four);
  check_kinds(results_of(arbitrated + "--caches.protocol=moesi --workload.outstanding=4"));
}

TEST_CASE("a replace in a recording is carried out in arbitrated timing too", "[command]") {
  const Folder folder;
  std::string rows = "initiator,op,address,size\n";
  for (int i = 0; i < 40; ++i) rows += "0,write,0x40,4\n0,replace,0x40,4\n1,read,0x80,4\n";
  const std::string run =
      "simulate --quiet --baseline=off --monitor=on --caches.count=2 --timing=arbitrated "
      "--workload.recording=" +
      folder.write("r.csv", rows) + " --json " + (folder / "o.json");
  for (const std::string order : {"recorded", "concurrent", "concurrent --workload.outstanding=4"}) {
    const Outcome outcome = earshot(run + " --workload.order=" + order);
    INFO(order << "\n" << outcome.out);
    REQUIRE(outcome.status == 0);
    const Json json = Json::parse(file_text(folder / "o.json"));
    CHECK(json["memory"]["block-writes"] > 0);
    if (order == "recorded") CHECK(json["memory"]["block-writes"] == 40);
  }
}

TEST_CASE("the same input gives the same bytes in arbitrated timing", "[command]") {
  const Folder folder;
  for (const std::string variant :
       {"--bus.arbitration=lottery", "--workload.outstanding=3", "--memory.kind=dram"}) {
    const std::string run = "simulate " + arbitrated + variant + " --json ";
    CHECK(earshot(run + (folder / "a.json")).out == earshot(run + (folder / "b.json")).out);
    CHECK(file_text(folder / "a.json") == file_text(folder / "b.json"));
  }
}

TEST_CASE("a wait beyond the limit is a finding, and the answer is given all the same", "[command]") {
  const Folder folder;
  const std::string run = "simulate " + arbitrated + "--json " + (folder / "o.json") + " --bus.longest-wait=";
  const Outcome fine = earshot(run + "900us");
  CHECK(fine.status == 0);
  const Outcome outcome = earshot(run + "30ns");
  INFO(outcome.out);
  CHECK(outcome.status == 1);
  CHECK(outcome.out.find("An access takes") <
        outcome.out.find("for a grant of the bus; bus.longest-wait allows 30.0 ns"));
  const Json json = Json::parse(file_text(folder / "o.json"));
  REQUIRE(json["findings"].size() == 4);
  const std::string first = json["findings"][0].get<std::string>();
  char longest[40];
  std::snprintf(longest, sizeof longest, "%.1f ns", real(json["bus"]["grants"][0]["longest-wait-ns"]));
  CHECK(first == std::string("initiator 0 waited ") + longest +
                     " for a grant of the bus; bus.longest-wait allows 30.0 ns");
}

TEST_CASE("nothing completing for too long is a finding that prints who waits for what", "[command]") {
  const Outcome outcome = earshot(
      "simulate --baseline=off --workload.pattern=private --workload.accesses=10 "
      "--timing=arbitrated --bus.stall-cycles=6 " +
      dram);
  INFO(outcome.out);
  CHECK(outcome.status == 1);
  CHECK(outcome.out.find("nothing has completed for 6 bus cycles") != std::string::npos);
  CHECK(outcome.out.find("bus: read of port 0, line 0x") != std::string::npos);
  CHECK(outcome.out.find("cache0: miss to line 0x") != std::string::npos);
  CHECK(outcome.out.find("player0: waits for its access: initiator 0, ") != std::string::npos);
  CHECK(outcome.out.find("memory_memory: ") != std::string::npos);
}

TEST_CASE("the command log of a run that ends in a finding is written, too", "[command]") {
  const Folder folder;
  const Outcome outcome = earshot(
      "simulate --baseline=off --workload.pattern=private --workload.accesses=10 --bus.stall-cycles=6 "
      "--timing=arbitrated --memory.command-log=" +
      (folder / "log.csv") + " " + dram);
  CHECK(outcome.status == 1);
  CHECK(file_text(folder / "log.csv").find(",ACT,") != std::string::npos);
}

TEST_CASE("the command log is written whole, with a header, one command a line in order", "[command]") {
  const Folder folder;
  const Json json = results_of(arbitrated + dram + "--memory.command-log=" + (folder / "log.csv"));
  CHECK(folder.files() == 1);
  std::istringstream lines(file_text(folder / "log.csv"));
  std::string line;
  std::getline(lines, line);
  CHECK(line == "window,channel,clock,time-ps,command,rank,bank-group,bank,row,column");
  const std::regex form(
      "memory,0,([0-9]+),([0-9]+),"
      "(ACT,0,[0-3],[0-3],[0-9]+,|(RD|RDA|WR|WRA),0,[0-3],[0-3],[0-9]+,[0-9]+|PRE,0,[0-3],[0-3],,|"
      "(PREA|REF),0,,,,)");
  std::uint64_t reads = 0;
  long long last = -1;
  while (std::getline(lines, line)) {
    std::smatch found;
    REQUIRE(std::regex_match(line, found, form));
    CHECK(std::stoll(found[1]) > last);
    last = std::stoll(found[1]);
    CHECK(std::stoll(found[2]) == last * 5000 / 6);  // 1200 MHz
    if (found[4] == "RD") ++reads;
  }
  CHECK(reads == whole(json["memory"]["dram"][0]["read-bursts"]));
}

TEST_CASE("the DDR4 demo names its bottleneck, splits the latency, and every access is coherent",
          "[command]") {
  const Folder folder;
  const Outcome outcome =
      earshot("simulate " EARSHOT_SOURCE "/configs/sonar-buoy-ddr4.ini --json " + (folder / "o.json"));
  INFO(outcome.out);
  REQUIRE(outcome.status == 0);
  const Json json = Json::parse(file_text(folder / "o.json"));
  CHECK(json["checks"]["line-accesses-checked"] == 420530);
  CHECK(json["bottleneck"]["resource"] == "data bus");
  CHECK(real(json["latency"]["parts-ns"]["wait-for-grant"]) > 0);
  CHECK(real(json["latency"]["parts-ns"]["memory-array"]) > 0);
  check_kinds(json);
  const std::string text = unwrapped(outcome.out);
  CHECK(text.find("First to saturate is the data bus, ") != std::string::npos);
  CHECK(text.find("DRAM ddr4-2400t, 1 x 32 bits: of ") != std::string::npos);
  CHECK(text.find("Energy, an estimate: ") != std::string::npos);
  CHECK(text.find("miss-from-memory") != std::string::npos);
  std::istringstream lines(outcome.out);
  for (std::string line; std::getline(lines, line);) CHECK(line.size() <= 80);
  // The baseline on its own, which has its DRAM commands judged, is what was compared with.
  const Json alone =
      results_of(EARSHOT_SOURCE "/configs/sonar-buoy-ddr4.ini --caches.protocol=write-through-update --baseline=off");
  CHECK(alone["elapsed-ns"] == json["baseline"]["elapsed-ns"]);
}

TEST_CASE("packing moves pages together and changes nothing but addresses", "[command]") {
  const std::string run = "--baseline=off --workload.recording=" EARSHOT_SOURCE
                          "/configs/recordings/sonar-buoy.earshot.zst --caches.size=8KiB ";
  const Json as_recorded = results_of(run);
  const Json packed = results_of(run + "--workload.addresses=packed");
  CHECK(packed["checks"]["reads-compared-with-recording"] ==
        as_recorded["checks"]["reads-compared-with-recording"]);
  CHECK(packed["accesses"] == as_recorded["accesses"]);  // a way of these caches is smaller than a page
  CHECK(packed["latency"]["total-ps"] == as_recorded["latency"]["total-ps"]);
}

TEST_CASE("an uncached window keeps its plain memory beside DRAM", "[command]") {
  const Folder folder;
  const std::string recording = folder.write(
      "r.csv",
      "initiator,op,address,size\n0,read,0x40,4\n0,write,0x90000000,4\n1,read,0x90000000,4\n1,read,0x40,4\n");
  for (const std::string timing : {"annotated", "arbitrated"}) {
    const Json json = results_of(
        "--baseline=off --caches.count=2 --workload.recording=" + recording + " --timing=" + timing +
        " --memory.kind=dram --memory.read-latency=20ns "
        "\"--bus.windows=ram 0x0..0x7fffffff cached, io 0x90000000..0x9000ffff uncached\"");
    CHECK(json["accesses"]["uncached"] == 2);
    CHECK(json["memory"]["dram"][0]["window"] == "ram");
    CHECK(json["findings"].empty());
  }
}
