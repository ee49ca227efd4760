// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Bad values of the keys of arbitrated timing, of DRAM and of the workload: each refused with file, line and key, what
// was expected, what to do.
#include "command_runner.h"

using namespace command_tests;

namespace {

// `ini` has its keys from line 3 on.
void refuse(const std::string& ini, const std::string& message) {
  const Folder folder;
  refuses(folder, "simulate " + folder.write("p.ini", "baseline = off\nworkload.pattern = uniform\n" + ini),
          message);
}

const std::string arbitrated = "timing = arbitrated\n[bus]\n";  // bus keys from line 5 on
const std::string dram = "[memory]\nkind = dram\n";             // memory keys from line 5 on

}  // namespace

TEST_CASE("words that are no timing, structure, arbitration or kind of memory are refused with the list",
          "[command]") {
  refuse("timing = exact\n", "p.ini:3: timing = 'exact'; expected annotated or arbitrated");
  refuse("[bus]\nkind = crossbar\n", "p.ini:4: bus.kind = 'crossbar'; expected split or connected");
  refuse(arbitrated + "arbitration = fair\n",
         "p.ini:5: bus.arbitration = 'fair'; expected first-come, round-robin, fixed-priority, time-slots, "
         "weighted-round-robin or lottery");
  refuse("[memory]\nkind = sram\n", "p.ini:4: memory.kind = 'sram'; expected plain or dram");
  refuse(dram + "scheduling = fifo\n",
         "p.ini:5: memory.scheduling = 'fifo'; expected first-ready, first-come or one-at-a-time");
  refuse(dram + "row-policy = shut\n",
         "p.ini:5: memory.row-policy = 'shut'; expected open, closed or idle-timeout");
  refuse(dram + "refresh = rank\n", "p.ini:5: memory.refresh = 'rank'; expected all-bank, per-bank or off");
  refuse(dram + "bank-hash = maybe\n", "p.ini:5: memory.bank-hash = 'maybe'; expected on or off");
  refuse("[workload]\naddresses = virtual\n",
         "p.ini:4: workload.addresses = 'virtual'; expected recorded or packed");
}

TEST_CASE("numbers out of their range are refused with the range", "[command]") {
  refuse("[bus]\nclock = 0ns\n",
         "p.ini:4: bus.clock = '0ns'; expected a time above 0, of at most 1 ms in whole picoseconds, with a "
         "unit: 5ns, "
         "1.25ns, 800ps, 1us, 3 bus-cycles");
  refuse("[bus]\nturnaround-cycles = 1001\n",
         "p.ini:4: bus.turnaround-cycles = '1001'; expected a whole number from 0 to 1000");
  refuse(arbitrated + "outstanding = 0\n",
         "p.ini:5: bus.outstanding = '0'; expected a whole number from 1 to 1024");
  refuse(arbitrated + "stall-cycles = -1\n",
         "p.ini:5: bus.stall-cycles = '-1'; expected a whole number from 0 to 1000000000000");
  refuse(arbitrated + "longest-wait = 3\n",
         "p.ini:5: bus.longest-wait = '3'; expected a time of at most 1 ms in whole picoseconds, with a "
         "unit: 5ns, "
         "1.25ns, 800ps, 1us, 3 bus-cycles");
  refuse("timing = arbitrated\n[caches]\nmisses = 0\n",
         "p.ini:5: caches.misses = '0'; expected a whole number from 1 to 64");
  refuse("timing = arbitrated\n[caches]\nwrite-back-slots = 65\n",
         "p.ini:5: caches.write-back-slots = '65'; expected a whole number from 1 to 64");
  refuse("timing = arbitrated\n[workload]\norder = concurrent\noutstanding = 65\n",
         "p.ini:6: workload.outstanding = '65'; expected a whole number from 1 to 64");
  refuse(dram + "age-cap = 0\n",
         "p.ini:5: memory.age-cap = '0'; expected a whole number from 1 to 4294967296");
  refuse(dram + "ranks = 17\n", "p.ini:5: memory.ranks = '17'; expected a whole number from 1 to 16");
}

TEST_CASE("arbitration that does not fit the caches is refused", "[command]") {
  refuse(arbitrated + "arbitration = time-slots\nslots = 0, 1, 2\n",
         "p.ini:6: bus.slots: port 3 owns no slot and would never be granted; expected at least one");
  refuse(arbitrated + "arbitration = time-slots\nslot-cycles = 0\n",
         "p.ini:6: bus.slot-cycles = '0'; expected a whole number from 1 to 1000000");
  refuse(arbitrated + "arbitration = lottery\nweights = 1, 2\n",
         "p.ini:6: bus.weights: 2 for 4 ports; expected one a port, or none");
  refuse(arbitrated + "arbitration = weighted-round-robin\nweights = 1, 2, 3, 0\n",
         "p.ini:6: bus.weights: 0 for port 3, which would never be granted; expected at least 1");
  refuse(arbitrated + "arbitration = fixed-priority\npriorities = 0 1 2 4\n",
         "p.ini:6: bus.priorities: there is no port 4; the bus has ports 0 to 3\n"
         "p.ini:6: bus.priorities: port 3 is listed 0 times; expected every port once");
  refuse(arbitrated + "arbitration = lottery\nweights = 1;2\n",
         "p.ini:6: bus.weights = '1;2'; expected whole numbers up to 1000000, separated by commas: 0, 1, 3");
}

TEST_CASE("keys that would be without effect are refused with what to do", "[command]") {
  refuse("[bus]\narbitration = round-robin\n",
         "p.ini:4: bus.arbitration = round-robin: only with timing = arbitrated; set that, or leave it at "
         "first-come");
  refuse(arbitrated + "weights = 1, 2, 3, 4\n",
         "p.ini:5: bus.weights = 1, 2, 3, 4: only with bus.arbitration = weighted-round-robin or lottery; "
         "set that, or "
         "leave the key out");
  refuse("[caches]\nmisses = 2\n",
         "p.ini:4: caches.misses = 2: only with timing = arbitrated; set that, or leave it at 4");
  refuse(
      "[workload]\noutstanding = 4\n",
      "p.ini:4: workload.outstanding = 4: only with timing = arbitrated; set that, or leave it at 1\n"
      "p.ini:4: workload.outstanding = 4: only with workload.order = concurrent; set that, or leave it at 1");
  refuse("[memory]\ngrade = ddr3-1600k\n",
         "p.ini:4: memory.grade = ddr3-1600k: only with memory.kind = dram; set that, or leave it at "
         "ddr4-2400t");
  refuse(
      dram + "read-latency = 50ns\n",
      "p.ini:5: memory.read-latency: only with memory.kind = plain or an uncached window; leave the key out");
  refuse(dram + "row-timeout = 50\n",
         "p.ini:5: memory.row-timeout = 50: only with memory.row-policy = idle-timeout; set that, or leave "
         "it at 200");
  refuse(
      dram + "command-log = log.csv\n",
      "p.ini:5: memory.command-log = log.csv: only with timing = arbitrated; set that, or leave the key out");
  refuse("[workload]\naddresses = packed\n",
         "p.ini:4: workload.addresses = packed: a pattern's addresses are packed as they are; leave it at "
         "recorded");
}

TEST_CASE("a key left at its default is never without effect", "[command]") {
  CHECK(earshot("simulate --quiet --baseline=off --workload.pattern=uniform --workload.accesses=10 "
                "--bus.arbitration=first-come --memory.grade=ddr4-2400t --workload.outstanding=1")
            .status == 0);
}

TEST_CASE("widths that do not divide a line are refused", "[command]") {
  refuse("[bus]\nwidth = 64\n",
         "p.ini:4: bus.width: 64 bytes do not divide a line of 32; expected at most caches.line");
  refuse("[memory]\nbeat = 64\n",
         "p.ini:4: memory.beat: 64 bytes do not divide a line of 32; expected at most caches.line");
  refuse(dram + "channel-width = 12\n",
         "p.ini:5: memory.channel-width: 12 bits are no multiple of a device's 8\n"
         "p.ini:5: memory.channel-width: a burst of 96 bits; expected a power of two of bytes");
}

TEST_CASE("grades that do not exist, do not cover or contradict themselves are refused", "[command]") {
  refuse(dram + "grade = ddr4-2400\n",
         "p.ini:5: memory.grade: ddr4-2400: neither a built-in grade nor a file; built-in are ddr3-1600k, "
         "ddr4-2400r, "
         "ddr4-2400t, ddr4-3200aa, lpddr4-3200, ddr5-4800b");
  refuse(dram + "density = 3\ndevice-width = 5\n",
         "p.ini:5: memory.density = 3: ddr4-2400t does not cover it; expected one of 8, 4, 16\n"
         "p.ini:6: memory.device-width = 5: ddr4-2400t does not cover it; expected one of 8, 4, 16");
  refuse(dram + "refresh = per-bank\n",
         "p.ini:5: memory.refresh: per-bank refresh, which JESD79-4 does not have");

  const Folder folder;
  std::string grade = file_text(EARSHOT_SOURCE "/models/dram/grades/ddr4-2400t.grade");
  grade = std::regex_replace(grade, std::regex("\ntRC [^\n]*"), "\ntRC 40ns");
  folder.write("mine.grade", grade);
  refuses(
      folder,
      "simulate " +
          folder.write("p.ini", "workload.pattern = uniform\n[memory]\nkind = dram\ngrade = mine.grade\n"),
      "p.ini:4: memory.grade: mine.grade:22: tRC of 48 clocks is below tRAS + tRP of 56");
}

TEST_CASE("DRAM policies and maps that cannot be are refused", "[command]") {
  refuse(dram + "address-map = row rank bank column\n",
         "p.ini:5: memory.address-map: \"row rank bank column\": it misses group, of which there are 4");
  refuse(dram + "address-map = row line\n",
         "p.ini:5: memory.address-map: \"row line\": \"line\" is no field; expected row, rank, bank, group, "
         "column or "
         "channel");
  refuse("timing = arbitrated\n" + dram + "write-high = 40\n",
         "p.ini:6: memory.write-high: the high mark 40 is above the queue's length 32");
  refuse("timing = arbitrated\n" + dram + "write-low = 30\n",
         "p.ini:6: memory.write-low: the low mark 30 is not below the high mark 24");
  refuse(dram + "[bus]\nwindows = ram 0x0..0xffffffffff cached\n",
         "p.ini:6: bus.windows: window 'ram' is larger than the DRAM behind it, which holds 8589934592 "
         "bytes; expected at "
         "most its first address + 0x1ffffffff");
  const Folder folder;
  refuses(folder,
          "simulate --workload.pattern=uniform --timing=arbitrated --memory.kind=dram --memory.command-log=" +
              (folder / "no/log.csv"),
          "no/log.csv: cannot be written: No such file or directory");
}

TEST_CASE("all problems are reported at once, and unknown keys with the nearest", "[command]") {
  refuse("timing = arbitrated\n[bus]\nwidth = 64\narbitration = lottery\nweights = 1\n" + dram +
             "density = 3\n[workload]\naddresses = packed\n",
         "p.ini:5: bus.width: 64 bytes do not divide a line of 32; expected at most caches.line\n"
         "p.ini:7: bus.weights: 1 for 4 ports; expected one a port, or none\n"
         "p.ini:10: memory.density = 3: ddr4-2400t does not cover it; expected one of 8, 4, 16\n"
         "p.ini:12: workload.addresses = packed: a pattern's addresses are packed as they are; leave it at "
         "recorded");
  refuse("[memory]\nrow-polisy = open\n",
         "p.ini:4: unknown key 'memory.row-polisy'; did you mean 'memory.row-policy'?");
}

TEST_CASE("a recording that the DRAM does not hold is refused with the way out", "[command]") {
  const Folder folder;
  const std::string recording = folder.write("r.csv", "initiator,op,address,size\n0,read,0x7fff00001000,4\n");
  refuses(
      folder, "simulate --baseline=off --memory.kind=dram --workload.recording=" + recording,
      "r.csv: access 1 of its initiator (initiator 0, read of 4 bytes at 0x7fff00001000) was answered with "
      "TLM_ADDRESS_ERROR_RESPONSE; no window holds that address: workload.addresses = packed moves a "
      "recording's "
      "pages together");
  CHECK(earshot("simulate --quiet --memory.kind=dram --workload.addresses=packed --workload.recording=" +
                recording)
            .status == 0);
  const std::string wide =
      folder.write("w.csv", "initiator,op,address,size\n0,read,0x0,4\n0,read,0x5000,4\n0,read,0x9ffe,4\n");
  refuses(folder,
          "simulate --baseline=off --workload.addresses=packed \"--bus.windows=ram 0x1000..0x2fff cached\" "
          "--workload.recording=" +
              wide,
          "w.csv: touches 4 pages of 4 KiB; window 'ram' has room for 2");
}
