// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The command as a user sees it: exit statuses, messages and results of build/earshot itself.
#include "command_runner.h"

using namespace command_tests;

namespace {

constexpr const char* two_writers =
    "initiator,op,address,size,value\n"
    "0,write,0x40,4,1\n"
    "1,write,0x40,4,2\n"
    "0,read,0x40,4,2\n"
    "1,write,0x40,4,3\n"
    "0,replace,0x40,4\n"
    "1,replace,0x40,4\n"
    "0,read,0x40,4,3\n";

const std::string small = "--caches.count=2 --caches.size=1KiB ";

}  // namespace

TEST_CASE("a small recording gives exact counts under the dirty owner and its baseline", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("two.csv", two_writers);
  const Outcome outcome =
      earshot("simulate " + small + "--workload.recording=" + recording + " --json " + (folder / "out.json"));
  INFO(outcome.out);
  REQUIRE(outcome.status == 0);
  const Json json = Json::parse(file_text(folder / "out.json"));
  CHECK(json["schema"] == 1);
  CHECK(json["accesses"] == Json::parse(R"({"reads":2,"writes":3,"hits":2,"misses":3,"uncached":0,"errors":0})"));
  CHECK(json["bus"]["transactions"]["read"] == 3);
  CHECK(json["bus"]["transactions"]["update"] == 3);
  CHECK(json["bus"]["transactions"]["write-back"] == 1);
  CHECK(json["supplies"] == Json::parse(R"({"owner":1,"sharer":0,"memory":2})"));
  CHECK(json["memory"]["block-writes"] == 1);
  CHECK(json["memory"]["block-writes-at-end"] == 0);
  CHECK(json["memory"]["word-writes"] == 0);
  CHECK(json["baseline"]["memory"]["word-writes"] == 3);
  CHECK(json["baseline"]["memory"]["block-writes"] == 0);
  CHECK(json["checks"]["line-accesses-checked"] == 5);
  CHECK(json["checks"]["reads-compared-with-recording"] == 2);
  CHECK(unwrapped(outcome.out).find("under write-through-update") != std::string::npos);
  CHECK(unwrapped(outcome.out).find("3.00 times fewer writes.") != std::string::npos);
}

TEST_CASE("the document has every field of the contract", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("two.csv", two_writers);
  REQUIRE(earshot("simulate " + small + "--quiet --workload.recording=" + recording + " --json " + (folder / "o.json"))
              .status == 0);
  const Json json = Json::parse(file_text(folder / "o.json"));
  for (const char* pointer :
       {"/schema", "/configuration/timing", "/configuration/caches/count", "/configuration/caches/protocol",
        "/configuration/caches/size", "/configuration/caches/ways", "/configuration/caches/line",
        "/configuration/caches/replacement", "/configuration/bus/kind", "/configuration/bus/arbitration",
        "/configuration/bus/clock", "/configuration/bus/width", "/configuration/memory/kind",
        "/configuration/workload/recording", "/configuration/workload/order", "/accesses/reads", "/accesses/writes",
        "/accesses/hits", "/accesses/misses", "/bus/transactions/read", "/bus/transactions/read-exclusive",
        "/bus/transactions/upgrade", "/bus/transactions/update", "/bus/transactions/write-through",
        "/bus/transactions/write-back", "/bus/transactions/io-read", "/bus/transactions/io-write", "/bus/utilisation",
        "/bus/wait-ns", "/supplies/owner", "/supplies/sharer", "/supplies/memory", "/memory/block-reads",
        "/memory/block-writes", "/memory/word-writes", "/latency/mean-ns", "/latency/p50-ns", "/latency/p95-ns",
        "/latency/p99-ns", "/latency/max-ns", "/latency/parts-ns/hit", "/latency/parts-ns/wait-for-grant",
        "/latency/parts-ns/snoop", "/latency/parts-ns/owner-supply", "/latency/parts-ns/memory-queue",
        "/latency/parts-ns/memory-array", "/latency/parts-ns/transfer", "/initiators/1/accesses/hits",
        "/initiators/1/latency/p99-ns", "/caution"}) {
    INFO(pointer);
    CHECK(json.contains(Json::json_pointer(pointer)));
  }
  double parts = 0;
  for (const auto& [name, part] : json["latency"]["parts-ns"].items()) parts += part.get<double>();
  CHECK(parts == Approx(json["latency"]["mean-ns"].get<double>()));
}

TEST_CASE("the same input gives the same bytes, in both orders", "[command]") {
  const Folder folder;
  for (const std::string order : {"recorded", "concurrent"}) {
    const std::string run = "simulate --workload.pattern=uniform --workload.accesses=3000 --workload.order=" + order +
                            " --caches.size=1KiB --caches.replacement=random --json ";
    const Outcome first = earshot(run + (folder / "a.json"));
    const Outcome second = earshot(run + (folder / "b.json"));
    INFO(first.out);
    CHECK(first.status == 0);
    CHECK(first.out == second.out);
    CHECK(file_text(folder / "a.json") == file_text(folder / "b.json"));
    CHECK(file_text(folder / "a.json").size() > 1000);
  }
}

TEST_CASE("the text answer fits 80 columns, decides first and ends with the caution", "[command]") {
  const Outcome outcome = earshot("simulate --workload.pattern=migratory --workload.accesses=2000");
  REQUIRE(outcome.status == 0);
  std::istringstream lines(outcome.out);
  for (std::string line; std::getline(lines, line);) {
    INFO(line);
    CHECK(line.size() <= 80);
  }
  const std::size_t memory = outcome.out.find("Memory is written"), saturation = outcome.out.find("First to saturate"),
                    latency = outcome.out.find("An access takes"), caution = outcome.out.find("Cycle-approximate");
  CHECK(memory < saturation);
  CHECK(saturation < latency);
  CHECK(latency < caution);
  CHECK(caution != std::string::npos);
}

TEST_CASE("every protocol plays every pattern in both orders without a violation", "[command]") {
  for (const std::string protocol : {"write-through-update", "dirty-owner-update", "dragon", "firefly",
                                     "competitive-update", "msi", "mesi", "moesi", "berkeley", "write-once"})
    for (const std::string pattern :
         {"private", "read-shared", "producer-consumer", "migratory", "false-sharing", "uniform"})
      for (const std::string order : {"recorded", "concurrent"}) {
        const Outcome outcome =
            earshot("simulate --monitor=on --baseline=off --quiet --caches.size=512 --caches.ways=2 "
                    "--workload.accesses=1500 --caches.protocol=" +
                    protocol + " --workload.pattern=" + pattern + " --workload.order=" + order);
        INFO(protocol << " " << pattern << " " << order << "\n" << outcome.out);
        CHECK(outcome.status == 0);
      }
}

TEST_CASE("dirty lines are reported when they are not flushed", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("w.csv", "initiator,op,address,size,value\n0,write,0x40,4,1\n");
  const Outcome kept = earshot("simulate --flush-at-end=off --workload.recording=" + recording);
  CHECK(kept.status == 0);
  CHECK(unwrapped(kept.out).find("1 lines are still dirty in caches") != std::string::npos);
  const Outcome flushed = earshot("simulate --workload.recording=" + recording);
  CHECK(unwrapped(flushed.out).find("1 dirty lines were written") != std::string::npos);
}

TEST_CASE("a protocol table of the user's own is proved and runs", "[command]") {
  const Folder folder;
  const std::string table = folder.write("mine.table", file_text(EARSHOT_SOURCE "/models/protocol/tables/mesi.table"));
  const Outcome outcome = earshot("simulate --workload.pattern=uniform --workload.accesses=500 --caches.protocol=" + table);
  INFO(outcome.out);
  CHECK(outcome.status == 0);
}

TEST_CASE("a table that fails its proof is not run: its counterexample is shown", "[command]") {
  const Folder folder;
  std::string text = file_text(EARSHOT_SOURCE "/models/protocol/tables/msi.table");
  // A modified copy forgets to supply: memory's stale line is read.
  text = std::regex_replace(text, std::regex("supply"), "      ");
  text = std::regex_replace(text, std::regex(",? *write-memory"), "");
  const std::string table = folder.write("broken.table", text);
  const Outcome outcome = earshot("simulate --workload.pattern=uniform --caches.protocol=" + table);
  INFO(outcome.out);
  CHECK(outcome.status == 2);
  CHECK(outcome.out.find("the protocol is not sound, so it is not run") != std::string::npos);
  CHECK(earshot("prove " + table).status == 1);
}

TEST_CASE("prove says how many states it reached", "[command]") {
  const Outcome outcome = earshot("prove dragon --caches 2");
  INFO(outcome.out);
  CHECK(outcome.status == 0);
  CHECK(outcome.out.find("dragon") != std::string::npos);
}

TEST_CASE("convert keeps a recording's accesses", "[command]") {
  const Folder folder;
  const std::string text = folder.write("a.csv", two_writers);
  CHECK(earshot("convert " + text + " " + (folder / "b.earshot.zst")).status == 0);
  const Outcome back = earshot("convert " + (folder / "b.earshot.zst") + " " + (folder / "c.csv"));
  CHECK(folder.cleaned(back.out) == "7 accesses: c.csv\n");
  CHECK(earshot("simulate --quiet --workload.recording=" + (folder / "b.earshot.zst")).status == 0);
}

TEST_CASE("version and help are answered with status 0", "[command]") {
  CHECK(earshot("--version").out == "earshot 0.1.0\n");
  CHECK(earshot("--help").status == 0);
  for (const std::string verb : {"simulate", "prove", "record", "convert"}) CHECK(earshot(verb + " --help").status == 0);
  CHECK(earshot("simulate --help").out.find("caches.protocol") != std::string::npos);
}

// ---- Unusable input: status 2, a message that says where, what, and what was expected; nothing left behind.

TEST_CASE("unusable configurations are refused with file, line and key", "[command]") {
  const Folder folder;
  const std::string playing = "[workload]\npattern = uniform\n";
  const auto refuse = [&](const std::string& ini, const std::string& message) {
    refuses(folder, "simulate " + folder.write("p.ini", ini), message);
  };
  refuse("[caches]\nsise = 4KiB\n" + playing, "p.ini:2: unknown key 'caches.sise'; did you mean 'caches.size'?");
  refuse("[caches]\nsize = 4KiB\nsize = 8KiB\n" + playing,
         "p.ini:3: key 'caches.size' is given twice, first at p.ini:2; keep one");
  refuse("# a comment\n[bus]\nclock = 5\n" + playing,
         "p.ini:3: bus.clock = '5'; expected a time above 0, of at most 1 ms in whole picoseconds, with a unit: 5ns, "
         "1.25ns, 800ps, 1us, 3 bus-cycles");
  refuse("[bus]\nclock = 5 MHz\n" + playing,
         "p.ini:2: bus.clock = '5 MHz'; expected a time above 0, of at most 1 ms in whole picoseconds, with a unit: "
         "5ns, 1.25ns, 800ps, 1us, 3 bus-cycles");
  refuse("[caches]\nline = 48\n" + playing,
         "p.ini:2: caches.line: 48 bytes; expected a power of two from 8 to 256");
  refuse("[caches]\nsize = 10KB\n" + playing,
         "p.ini:2: caches.size = '10KB'; expected a size in bytes: 16384, 16KiB, 1MiB");
  refuse("[caches]\nsize = 16KiB\nways = 3\n" + playing,
         "p.ini:2: caches.size: 16384 bytes in 3 ways of 32-byte lines does not divide: the size must be a multiple of 96");
  refuse("[caches]\nreplacement = oldest\n" + playing,
         "p.ini:2: caches.replacement = 'oldest'; expected lru, tree-plru, fifo or random");
  refuse("[caches]\ncount = 65\n" + playing, "p.ini:2: caches.count = '65'; expected a whole number from 1 to 64");
  refuse("[bus]\nwindows = ram 0x0..0xffff cached, rom 0x8000..0x1ffff uncached\n" + playing,
         "p.ini:2: bus.windows: window 'rom' [0x8000, 0x1ffff] overlaps window 'ram' [0x0, 0xffff]: windows must be "
         "disjoint");
  refuse("[bus]\nwindows = ram 0x0..0xffff cached max-burst 12\n" + playing,
         "p.ini:2: bus.windows: window 'ram' [0x0, 0xffff] has a max_burst of 12 bytes; expected a power of two from 1 "
         "to 256, or 0 for no limit");
  for (const std::string wrong : {"max-burst", "max-burst 512", "max-burst x", "max-burst 4 4", "burst 4"})
    refuse("[bus]\nwindows = ram 0x0..0xffff cached " + wrong + '\n' + playing,
           "p.ini:2: bus.windows = 'ram 0x0..0xffff cached " + wrong +
               "'; expected windows as NAME FIRST..LAST cached|uncached [max-burst BYTES], separated by commas, names "
               "of letters, digits and _, bytes 0 for any or a power of two to 256");
  refuse("[caches]\ncount = none\nsize = big\n" + playing,
         "p.ini:2: caches.count = 'none'; expected a whole number from 1 to 64\n"
         "p.ini:3: caches.size = 'big'; expected a size in bytes: 16384, 16KiB, 1MiB");
  refuse("[caches\ncount = 4\n", "p.ini:1: '[caches' is neither a [section] nor key = value");
  refuse("[caches]\ncount = 4\n",
         "configuration: nothing to play; give workload.recording or workload.pattern");
  refuse("[workload]\npattern = zigzag\n",
         "p.ini:2: workload.pattern: kind 'zigzag', expected one of private, read-shared, producer-consumer, migratory, "
         "false-sharing, uniform");
}

TEST_CASE("unusable command lines are refused", "[command]") {
  const Folder folder;
  refuses(folder, "simulat x.ini", "'simulat' is no verb; did you mean 'simulate'?");
  refuses(folder, "simulate " + (folder / "no.ini"), "no.ini: cannot be read; expected a configuration file");
  refuses(folder, "simulate", "simulate: no configuration; expected the path of an INI file");
  refuses(folder, "simulate --workload.pattern=uniform --caches.way=4",
          "command line: unknown key 'caches.way'; did you mean 'caches.ways'?");
  refuses(folder, "simulate --workload.pattern=uniform --caches.ways=4 --caches.ways=2",
          "command line: key 'caches.ways' is given twice, first at command line; keep one");
  refuses(folder, "simulate --workload.pattern=uniform --caches.protocol=mersi",
          "command line: caches.protocol: mersi: neither a built-in table nor a file; built-in are write-through-update, dirty-owner-update, dragon, "
          "firefly, competitive-update, msi, mesi, moesi, berkeley, write-once; did you mean mesi?");
  refuses(folder, "simulate --workload.pattern=uniform --caches.protocol=mesi --caches.update-limit=3",
          "command line: caches.update-limit = 3: protocol 'mesi' does not count updates; leave the key out");
  refuses(folder, "simulate --workload.pattern=uniform --json " + (folder / "no/such/folder.json"),
          "no/such/folder.json: cannot be written: No such file or directory");
  refuses(folder, "simulate --workload.pattern=uniform --json", "command line: --json needs the name of a file");
  refuses(folder, "prove dragon --caches 9", "prove: --caches '9'; expected a whole number from 1 to 8");
  refuses(folder, "convert " + (folder / "a.csv"), "convert: expected FROM TO, two paths of recordings");
  refuses(folder, "record --into " + (folder / "a.csv"), "record: no program is named; expected -- PROGRAM ARGS");
}

TEST_CASE("unusable recordings are refused and name the place", "[command]") {
  const Folder folder;
  const auto refuse = [&](const std::string& name, const std::string& content, const std::string& start) {
    const Outcome outcome = earshot("simulate --workload.recording=" + folder.write(name, content));
    INFO(outcome.out);
    CHECK(outcome.status == 2);
    CHECK(folder.cleaned(outcome.out).rfind("earshot: ", 0) == 0);
    CHECK(folder.cleaned(outcome.out).find(start) != std::string::npos);
  };
  const std::string header = "initiator,op,address,size,value\n";
  refuse("a.csv", header + "0,read,0x40,4\n0,raed,0x40,4\n", "a.csv:3: ");
  refuse("a.csv", header + "0,read,0x40,0\n", "a.csv:2: ");
  refuse("a.csv", header + "0,read,0x40,4097\n", "a.csv:2: ");
  refuse("a.csv", header + "64,read,0x40,4\n", "a.csv:2: ");
  refuse("a.csv", header + "0,read,0x40\n", "a.csv:2: ");
  refuse("a.csv", header + "7,read,0x40,4\n",
         "a.csv: access 1 (initiator 7, read of 4 bytes at 0x40) is for initiator 7, but there are only 4 caches: set "
         "caches.count to 8 or more");
  refuse("a.csv.gz", std::string("\x1f\x8b\x08", 3) + std::string(20, '\x7f'), "a.csv.gz: ");
  refuse("a.earshot", "", "a.earshot");
  const Outcome missing = earshot("simulate --workload.recording=" + (folder / "none.csv"));
  CHECK(missing.status == 2);
  CHECK(folder.cleaned(missing.out).find("none.csv") != std::string::npos);
  // Cut a good binary file short.
  const std::string good = folder / "good.earshot";
  REQUIRE(earshot("convert " + folder.write("t.csv", two_writers) + " " + good).status == 0);
  const std::string bytes = file_text(good);
  refuse("cut.earshot", bytes.substr(0, bytes.size() - 3), "cut.earshot: ");
}

TEST_CASE("a recording that breaks off or misnames an initiator is refused in both orders", "[command]") {
  const Folder folder;
  const std::string run = "simulate --baseline=off --caches.count=2 --workload.recording=";
  std::string rows = "initiator,op,address,size\n";
  for (int i = 0; i < 5000; ++i) rows += std::to_string(i % 2) + ",read,0x" + std::to_string(i % 90) + "0,4\n";
  for (const std::string order : {"recorded", "concurrent"}) {
    INFO(order);
    refuses(folder, run + folder.write("late.csv", rows + "0,read,0x40,none\n") + " --workload.order=" + order,
            "late.csv:5002: size 'none', expected a decimal or 0x-hex number");
    refuses(folder, run + folder.write("third.csv", rows + "2,read,0x40,4\n") + " --workload.order=" + order,
            std::string("third.csv: ") +
                (order == "recorded" ? "access 5001 (initiator 2, read of 4 bytes at 0x40) is for"
                                     : "has accesses of") +
                " initiator 2, but there are only 2 caches: set caches.count to 3 or more");
  }
}

TEST_CASE("what a configuration names is checked together, each with its place", "[command]") {
  const Folder folder;
  refuses(folder,
          "simulate " + folder.write("p.ini", "[caches]\nprotocol = mexi\nsize = 1000\n[workload]\nrecording = no.csv\n"),
          "p.ini:2: caches.protocol: mexi: neither a built-in table nor a file; built-in are write-through-update, "
          "dirty-owner-update, dragon, firefly, competitive-update, msi, mesi, moesi, berkeley, write-once; did you mean "
          "mesi?\n"
          "p.ini:3: caches.size: 1000 bytes in 4 ways of 32-byte lines does not divide: the size must be a multiple of 128\n"
          "p.ini:5: workload.recording: no.csv: cannot be opened: No such file or directory");
}

TEST_CASE("a results document goes through a symbolic link and to a device without replacing it", "[command]") {
  const Folder folder;
  const std::string run = "simulate --quiet --baseline=off --workload.pattern=uniform --workload.accesses=10 --json ";
  folder.write("real.json", "old");
  fs::create_symlink(folder / "real.json", folder / "link.json");
  CHECK(earshot(run + (folder / "link.json")).status == 0);
  CHECK(fs::is_symlink(folder / "link.json"));
  CHECK(file_text(folder / "real.json").size() > 1000);
  CHECK(earshot(run + "/dev/null").status == 0);
  CHECK(fs::is_character_file("/dev/null"));
  CHECK(earshot(run + "/dev/full").status == 2);
  CHECK(folder.files() == 2);
}

TEST_CASE("keys may be given as two words, and times in bus cycles wherever they stand", "[command]") {
  const Folder folder;
  const std::string config = folder.write("c.ini", "quantum = 3 bus-cycles\n[workload]\npattern = uniform\naccesses = 10\n");
  const Outcome outcome = earshot("simulate --caches.count 2 " + config);
  INFO(outcome.out);
  CHECK(outcome.status == 0);
  CHECK(outcome.out.find("2 caches of") != std::string::npos);
}

TEST_CASE("a window's max-burst sends a line to its memory in pieces", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("two.csv", two_writers);  // two fills from memory, five accesses
  const auto memory_ns = [&](const std::string& words) {
    REQUIRE(earshot("simulate --quiet --baseline=off --caches.count=2 --memory.read-latency=40ns \"--bus.windows=ram "
                    "0x0..0xffff cached" + words + "\" --workload.recording=" + recording + " --json " +
                    (folder / "out.json"))
                .status == 0);
    return Json::parse(file_text(folder / "out.json"))["latency"]["parts-ns"]["memory-array"].get<double>();
  };
  CHECK(memory_ns(" max-burst 8") - memory_ns("") == Approx(2 * 3 * 40 / 5.0));
}

TEST_CASE("a platform of two windows is built without a word from the kernel", "[command]") {
  const Outcome outcome = earshot(
      "simulate --quiet --workload.pattern=uniform --workload.accesses=10 "
      "\"--bus.windows=ram 0x0..0xffff cached, io 0x10000..0x1ffff uncached\"");
  CHECK(outcome.status == 0);
  CHECK(outcome.out.empty());
}

TEST_CASE("an access outside every window is unusable input, named", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("r.csv", "initiator,op,address,size\n0,read,0x20000,4\n");
  refuses(folder, "simulate --baseline=off \"--bus.windows=ram 0x0..0xffff cached\" --workload.recording=" + recording,
          "r.csv: access 1 of its initiator (initiator 0, read of 4 bytes at 0x20000) was answered with "
          "TLM_ADDRESS_ERROR_RESPONSE");
}

TEST_CASE("a recording whose values contradict its order is a finding", "[command]") {
  const Folder folder;
  const std::string recording = folder.write(
      "r.csv", "initiator,op,address,size,value\n0,write,0x40,4,1\n1,read,0x40,4,2\n");
  const Outcome outcome = earshot("simulate --workload.recording=" + recording);
  CHECK(outcome.status == 1);
  CHECK(outcome.out.find("1 of 1 reads returned another value than the recording has.") != std::string::npos);
  CHECK(outcome.out.find("the recording has value 0x2, the platform returned 0x1") != std::string::npos);
  const Outcome approximate = earshot(
      "simulate --workload.recording=" +
      folder.write("f.csv", "# order: approximate\ninitiator,op,address,size,value\n0,write,0x40,4,1\n1,read,0x40,4,2\n"));
  INFO(approximate.out);
  CHECK(approximate.status == 0);
}
