// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The demonstration program: the listening side of a sonar buoy, in fixed point. Four threads pass blocks
// through rings, one to the next, and all keep a shared status block up to date:
//
//   capture -> filter bank -> detector -> logger (the main thread)
//
// Four hydrophones hear noise, the tone of a distant ship, and the echoes of a ping. The filter bank points
// two beams and splits each into eight bands; the detector compares the bands with their background and looks
// for the ping in the envelope; the logger packs what was found into a log in memory. The gain goes back from
// detector to capture. The sea is the same every time, and no block is ever dropped, so the log is, too.
#include <algorithm>
#include <array>
#include <atomic>
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <thread>

namespace {

constexpr int blocks_to_process = 96;
constexpr int hydrophones = 4;
constexpr int frames = 64;  // samples of each hydrophone in a block
constexpr int beams = 2;
constexpr int bands = 8;
constexpr int envelope_step = 4;
constexpr int longest_delay = 8;
constexpr int background_blocks = 16;
constexpr int track_count = 16;

struct SampleBlock {
  std::int32_t number;
  std::int16_t samples[hydrophones][frames];
};

struct BandBlock {
  std::int32_t number;
  std::int32_t energy[beams][bands];
  std::int16_t envelope[beams][frames / envelope_step];
};

struct Report {
  std::int32_t number;
  std::int32_t loudest_match;
  std::uint16_t contacts;  // a bit for each beam and band
  std::uint8_t level[beams][bands];
};

// One producer, one consumer; both look at both counters.
template <typename T, unsigned size>
class Ring {
 public:
  T& slot_to_fill() {
    while (filled_.load(std::memory_order_relaxed) - emptied_.load(std::memory_order_acquire) == size) {
      std::this_thread::yield();
    }
    return slots_[filled_.load(std::memory_order_relaxed) % size];
  }
  void pass_on() { filled_.fetch_add(1, std::memory_order_release); }

  const T& slot_to_empty() {
    while (filled_.load(std::memory_order_acquire) == emptied_.load(std::memory_order_relaxed)) {
      std::this_thread::yield();
    }
    return slots_[emptied_.load(std::memory_order_relaxed) % size];
  }
  void give_back() { emptied_.fetch_add(1, std::memory_order_release); }

 private:
  std::atomic<std::uint32_t> filled_{0};
  std::atomic<std::uint32_t> emptied_{0};
  T slots_[size];
};

enum Stage { capturing, filtering, detecting, logging, stages };

// What the buoy would send when asked how it is. Every thread writes to it, all on one or two lines.
struct Status {
  std::atomic<std::int32_t> blocks[stages];
  std::atomic<std::int32_t> heartbeat;
  std::atomic<std::int32_t> gain_shift;  // set by the detector, used by capture
  std::atomic<std::int32_t> loudest;
  std::atomic<std::int32_t> contacts;
  std::atomic<std::int32_t> log_bytes;

  void finished_block(Stage stage) {
    blocks[stage].fetch_add(1, std::memory_order_relaxed);
    heartbeat.fetch_add(1, std::memory_order_relaxed);
  }
};

// A contact that lasts. Kept by the detector, read by the logger, who may see one change: it shows, no more.
struct Track {
  std::atomic<std::int32_t> hits;
  std::atomic<std::int32_t> last_block;
  std::atomic<std::int32_t> level;
};

Ring<SampleBlock, 6> captured;
Ring<BandBlock, 8> filtered;
Ring<Report, 16> reports;
alignas(64) Status status;
alignas(64) std::array<Track, track_count> tracks;

// sine(i) = 4095 sin(2 pi i / 256), by Bhaskara's approximation: the same integers on every machine.
struct SineTable {
  std::int16_t value[256];
  SineTable() {
    for (int i = 0; i < 256; ++i) {
      const int half = i % 128;
      const int p = half * (128 - half);
      const int s = 4095 * 16 * p / (5 * 128 * 128 - 4 * p);
      value[i] = static_cast<std::int16_t>(i < 128 ? s : -s);
    }
  }
};
const SineTable sine;

// Sound as the hydrophones hear it: frame by frame, each a little later than its neighbour.
void capture() {
  static std::uint32_t noise = 2026;
  for (int number = 0; number < blocks_to_process; ++number) {
    SampleBlock& block = captured.slot_to_fill();
    block.number = number;
    for (int h = 0; h < hydrophones; ++h) {
      const int gain_shift = status.gain_shift.load(std::memory_order_relaxed);
      for (int f = 0; f < frames; ++f) {
        const int time = number * frames + f;
        noise = noise * 1664525 + 1013904223;
        int sound = static_cast<int>(noise >> 29) - 4;
        sound += sine.value[(time - h) * 24 & 255] >> 6;
        const int into_echo = time % 1536 - 900 - 2 * h;
        if (into_echo >= 0 && into_echo < frames) sound += sine.value[into_echo * 40 & 255] >> 3;
        block.samples[h][f] = static_cast<std::int16_t>(sound * 8 >> gain_shift);
      }
    }
    captured.pass_on();
    status.finished_block(capturing);
  }
}

// A second-order resonator: y = x + a y' - b y''. Coefficients in Q12.
struct Resonator {
  std::int32_t a, b;
  std::int32_t before, long_before;
};

class FilterBank {
 public:
  FilterBank() {
    for (int beam = 0; beam < beams; ++beam) {
      for (int band = 0; band < bands; ++band) {
        const int cosine = sine.value[(64 + 8 * (band + 1)) & 255];
        resonators_[beam][band] = {2 * cosine * 15 / 16, 4096 * 225 / 256, 0, 0};
      }
    }
  }

  void process(const SampleBlock& in, BandBlock& out) {
    for (int h = 0; h < hydrophones; ++h) {
      std::memcpy(&heard_[h][0], &heard_[h][frames], longest_delay * sizeof heard_[h][0]);
      std::memcpy(&heard_[h][longest_delay], &in.samples[h][0], sizeof in.samples[h]);
    }
    out.number = in.number;
    for (int beam = 0; beam < beams; ++beam) {
      point(beam, out.envelope[beam]);
      for (int band = 0; band < bands; ++band) out.energy[beam][band] = energy_of(resonators_[beam][band]);
    }
  }

 private:
  // Sums the hydrophones with the delays of this beam's direction.
  void point(int beam, std::int16_t* envelope) {
    int level = 0;
    for (int f = 0; f < frames; ++f) {
      int sum = 0;
      for (int h = 0; h < hydrophones; ++h)
        sum += heard_[h][f + longest_delay - (hydrophones - 1 - h) * (beam + 1)];
      sum_[f] = static_cast<std::int16_t>(sum / hydrophones);
      level += std::abs(sum);
      if (f % envelope_step == envelope_step - 1) {
        envelope[f / envelope_step] = static_cast<std::int16_t>(level / (hydrophones * envelope_step));
        level = 0;
      }
    }
  }

  std::int32_t energy_of(Resonator& r) {
    std::int32_t before = r.before;
    std::int32_t long_before = r.long_before;
    std::int64_t energy = 0;
    for (int f = 0; f < frames; ++f) {
      const auto now = static_cast<std::int32_t>(
          sum_[f] + ((std::int64_t{r.a} * before - std::int64_t{r.b} * long_before) >> 12));
      long_before = before;
      before = now;
      energy += std::int64_t{now} * now;
    }
    r.before = before;
    r.long_before = long_before;
    return static_cast<std::int32_t>(energy >> 10);
  }

  std::int16_t heard_[hydrophones][longest_delay + frames] = {};
  std::int16_t sum_[frames] = {};
  Resonator resonators_[beams][bands];
};

void filter() {
  static FilterBank bank;
  for (int number = 0; number < blocks_to_process; ++number) {
    const SampleBlock& in = captured.slot_to_empty();
    BandBlock& out = filtered.slot_to_fill();
    bank.process(in, out);
    captured.give_back();
    filtered.pass_on();
    status.finished_block(filtering);
  }
}

class Detector {
 public:
  void process(const BandBlock& in, Report& report) {
    report.number = in.number;
    report.contacts = 0;
    report.loudest_match = 0;
    for (int beam = 0; beam < beams; ++beam) {
      report.loudest_match = std::max(report.loudest_match, best_match(in.envelope[beam]));
      for (int band = 0; band < bands; ++band) {
        const std::int32_t energy = in.energy[beam][band];
        report.level[beam][band] = level_of(energy);
        if (stands_out(energy, beam, band, in.number)) {
          report.contacts = static_cast<std::uint16_t>(report.contacts | 1 << (beam * bands + band));
          follow(beam * bands + band, in.number, report.level[beam][band]);
        }
      }
    }
    status.loudest.store(report.loudest_match, std::memory_order_relaxed);
    status.gain_shift.store(report.loudest_match > 20000 ? 1 : 0, std::memory_order_relaxed);
  }

 private:
  // Twice the logarithm to base 2.
  static std::uint8_t level_of(std::int32_t energy) {
    int level = 0;
    for (; energy > 1; energy >>= 1) level += 2;
    return static_cast<std::uint8_t>(level);
  }

  // Whether the energy is far above its background: the mean of the blocks before.
  bool stands_out(std::int32_t energy, int beam, int band, int number) {
    std::int32_t* background = background_[beam][band];
    std::int64_t sum = 0;
    for (int i = 0; i < background_blocks; ++i) sum += background[i];
    background[number % background_blocks] = energy;
    return number >= background_blocks && energy > 4 * sum / background_blocks;
  }

  // The envelope against that of a ping, at every delay at which it fits.
  std::int32_t best_match(const std::int16_t* envelope) const {
    constexpr int points = frames / envelope_step;
    std::int32_t best = 0;
    for (int delay = 0; delay + ping_points <= points; ++delay) {
      std::int32_t match = 0;
      for (int i = 0; i < ping_points; ++i) match += ping_[i] * envelope[delay + i];
      if (match > best) best = match;
    }
    return best;
  }

  static void follow(int index, int number, int level) {
    Track& track = tracks[static_cast<std::size_t>(index)];
    track.hits.fetch_add(1, std::memory_order_relaxed);
    track.last_block.store(number, std::memory_order_relaxed);
    track.level.store(level, std::memory_order_relaxed);
    status.contacts.fetch_add(1, std::memory_order_relaxed);
  }

  static constexpr int ping_points = 12;
  std::int32_t ping_[ping_points] = {2, 6, 10, 13, 15, 16, 16, 15, 13, 10, 6, 2};
  std::int32_t background_[beams][bands][background_blocks] = {};
};

void detect() {
  static Detector detector;
  for (int number = 0; number < blocks_to_process; ++number) {
    const BandBlock& in = filtered.slot_to_empty();
    Report& report = reports.slot_to_fill();
    detector.process(in, report);
    filtered.give_back();
    reports.pass_on();
    status.finished_block(detecting);
  }
}

// The log: packets of a length, contents, and a checksum (CRC-16, polynomial 0x1021) in a buffer that wraps
// around.
class Log {
 public:
  Log() {
    for (int i = 0; i < 256; ++i) {
      unsigned crc = static_cast<unsigned>(i) << 8;
      for (int bit = 0; bit < 8; ++bit) crc = (crc & 0x8000) != 0 ? crc << 1 ^ 0x1021 : crc << 1;
      table_[i] = static_cast<std::uint16_t>(crc);
    }
  }

  void add(const Report& report) {
    begin();
    put(report.number & 0xff);
    put(report.contacts & 0xff);
    put(report.contacts >> 8);
    for (int beam = 0; beam < beams; ++beam) {
      for (int band = 0; band < bands; ++band) {
        put(report.level[beam][band] - last_level_[beam][band]);
        last_level_[beam][band] = report.level[beam][band];
      }
    }
    end();
    if (report.number % 8 == 7) add_status();
  }

  unsigned checksum() const { return last_crc_; }
  int bytes() const { return at_; }

 private:
  void add_status() {
    begin();
    for (const auto& blocks : status.blocks) put(blocks.load(std::memory_order_relaxed) & 0xff);
    for (const Track& track : tracks) {
      put(track.hits.load(std::memory_order_relaxed));
      put(track.last_block.load(std::memory_order_relaxed));
      put(track.level.load(std::memory_order_relaxed));
    }
    end();
  }

  void begin() { start_ = at_++; }
  void put(int byte) { bytes_[at_++ % size] = static_cast<std::uint8_t>(byte); }
  void end() {
    bytes_[start_ % size] = static_cast<std::uint8_t>(at_ - start_);
    unsigned crc = 0xffff;
    for (int i = start_; i < at_; ++i)
      crc = (crc << 8 ^ table_[(crc >> 8 ^ bytes_[i % size]) & 0xff]) & 0xffff;
    put(static_cast<int>(crc >> 8));
    put(static_cast<int>(crc & 0xff));
    last_crc_ = crc;
    status.log_bytes.store(at_, std::memory_order_relaxed);
  }

  static constexpr int size = 4096;
  std::uint8_t bytes_[size] = {};
  std::uint16_t table_[256];
  std::uint8_t last_level_[beams][bands] = {};
  int start_ = 0;
  int at_ = 0;
  unsigned last_crc_ = 0;
};

void log_reports() {
  static Log log;
  for (int number = 0; number < blocks_to_process; ++number) {
    log.add(reports.slot_to_empty());
    reports.give_back();
    status.finished_block(logging);
  }
}

}  // namespace

int main() {
  std::thread capture_thread(capture);
  std::thread filter_thread(filter);
  std::thread detector_thread(detect);
  log_reports();
  capture_thread.join();
  filter_thread.join();
  detector_thread.join();
  std::printf("%d blocks, %d contacts\n", status.blocks[logging].load(), status.contacts.load());
}
