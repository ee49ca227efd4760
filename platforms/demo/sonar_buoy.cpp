// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The demonstration program: the listening side of a sonar buoy, in fixed point. Four threads pass blocks
// through rings, one to the next, and all keep a shared status up to date:
//
//   capture -> filter bank -> detector -> logger (the main thread)
//
// Four hydrophones hear noise, the tone of a distant ship, and the echoes of a ping. The filter bank points
// two beams and splits each into eight bands; the detector compares each band with its background and looks
// for the ping; the logger packs what was found into packets in memory. The sea is the same every time, and
// no block is ever dropped, so the log is, too.
#include <algorithm>
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
constexpr int longest_delay = 8;     // of a hydrophone in a beam, in frames
constexpr int background_size = 64;  // blocks before, of a band
constexpr int background_step = 4;   // only every so many are looked at
constexpr int ping_size = 24;        // frames
constexpr int log_size = 8192;

struct Sound {  // what was heard
  std::int16_t samples[hydrophones][frames];
};
struct Spectrum {  // what it consists of
  std::int32_t energy[beams][bands];
  std::int16_t beam[beams][frames];
};
struct Report {  // what that means
  std::int32_t ping_match;
  std::uint8_t level[beams][bands];
  bool contact[beams][bands];
};

// One thread fills the slots, one empties them, both watch both counters.
template <typename T, unsigned size>
class Ring {
 public:
  T& slot_to_fill() {
    while (filled_.load() - emptied_.load() == size) std::this_thread::yield();
    return slots_[filled_.load() % size];
  }
  void pass_on() { ++filled_; }
  const T& slot_to_empty() {
    while (filled_.load() == emptied_.load()) std::this_thread::yield();
    return slots_[emptied_.load() % size];
  }
  void give_back() { ++emptied_; }

 private:
  std::atomic<std::uint32_t> filled_{0};
  std::atomic<std::uint32_t> emptied_{0};
  T slots_[size];
};

// What the buoy would send when asked how it is. Every thread writes to it, many times a block.
struct Status {
  std::atomic<std::int32_t> captured, filtered, detected, logged;  // blocks
  std::atomic<std::int32_t> heartbeat, loudest, contacts, log_bytes;
};

alignas(64) Status status;
alignas(64) Ring<Sound, 24> sounds;
alignas(64) Ring<Spectrum, 16> spectra;
alignas(64) Ring<Report, 32> reports;

// 4095 sin(2 pi i / 256), by Bhaskara's approximation: the same integers on every machine.
struct SineTable {
  std::int16_t value[256];
  SineTable() {
    for (int i = 0; i < 256; ++i) {
      const int p = i % 128 * (128 - i % 128);
      const int s = 4095 * 16 * p / (5 * 128 * 128 - 4 * p);
      value[i] = static_cast<std::int16_t>(i < 128 ? s : -s);
    }
  }
};
SineTable sine;

void capture() {
  std::uint32_t noise = 2026;
  for (int number = 0; number < blocks_to_process; ++number) {
    Sound& sound = sounds.slot_to_fill();
    for (int h = 0; h < hydrophones; ++h) {
      for (int f = 0; f < frames; ++f) {
        const int time = number * frames + f;
        noise = noise * 1664525 + 1013904223;
        int level = static_cast<int>(noise >> 29) - 4 + (sine.value[(time - h) * 24 & 255] >> 6);
        const int into_echo = time % 1536 - 900 - 2 * h;
        if (into_echo >= 0 && into_echo < ping_size) level += sine.value[into_echo * 40 & 255] >> 3;
        sound.samples[h][f] = static_cast<std::int16_t>(level * 8);
      }
      ++status.heartbeat;
    }
    sounds.pass_on();
    ++status.captured;
  }
}

class FilterBank {
 public:
  FilterBank() {
    for (int band = 0; band < bands; ++band)
      feedback_[band] = sine.value[(64 + 8 * (band + 1)) & 255] * 15 / 8;
  }

  void process(const Sound& sound, Spectrum& spectrum) {
    for (int h = 0; h < hydrophones; ++h) {
      std::memcpy(&heard_[h][0], &heard_[h][frames], longest_delay * sizeof heard_[h][0]);
      std::memcpy(&heard_[h][longest_delay], &sound.samples[h][0], sizeof sound.samples[h]);
    }
    for (int b = 0; b < beams; ++b) {
      point(b + 1, spectrum.beam[b]);
      for (int band = 0; band < bands; ++band) {
        spectrum.energy[b][band] = filter(feedback_[band], state_[b][band], spectrum.beam[b]);
      }
      ++status.heartbeat;
    }
  }

 private:
  // The mean of the hydrophones, each `delay` frames later than its neighbour.
  void point(int delay, std::int16_t* beam) const {
    for (int f = 0; f < frames; ++f) {
      int sum = 0;
      for (int h = 0; h < hydrophones; ++h)
        sum += heard_[h][f + longest_delay - (hydrophones - 1 - h) * delay];
      beam[f] = static_cast<std::int16_t>(sum / hydrophones);
    }
  }

  // A second-order resonator, y = x + a y' - (15/16)^2 y'', with a in Q12; returns the energy of its output.
  static std::int32_t filter(std::int32_t a, std::int32_t (&state)[2], const std::int16_t* beam) {
    std::int64_t y1 = state[0];
    std::int64_t y2 = state[1];
    std::int64_t energy = 0;
    for (int f = 0; f < frames; ++f) {
      const std::int64_t y = beam[f] + ((a * y1 - 3600 * y2) >> 12);
      y2 = y1;
      y1 = y;
      energy += y * y;
    }
    state[0] = static_cast<std::int32_t>(y1);
    state[1] = static_cast<std::int32_t>(y2);
    return static_cast<std::int32_t>(energy >> 10);
  }

  std::int16_t heard_[hydrophones][longest_delay + frames] = {};
  std::int32_t feedback_[bands];
  std::int32_t state_[beams][bands][2] = {};
};

void filter() {
  static FilterBank bank;
  for (int number = 0; number < blocks_to_process; ++number) {
    const Sound& sound = sounds.slot_to_empty();
    bank.process(sound, spectra.slot_to_fill());
    sounds.give_back();
    spectra.pass_on();
    ++status.filtered;
  }
}

std::int32_t background[beams][bands][background_size];  // the detector's own
std::int32_t ping[ping_size];

// Whether the energy is far above what the band had before, which it then is part of.
bool stands_out(std::int32_t energy, std::int32_t (&before)[background_size], int number) {
  std::int64_t sum = 0;
  for (int i = number % background_step; i < background_size; i += background_step) sum += before[i];
  before[number % background_size] = energy;
  return number >= background_size / 2 && energy > 4 * sum * background_step / background_size;
}

void detect() {
  for (int i = 0; i < ping_size; ++i) ping[i] = sine.value[i * 40 & 255] >> 6;
  for (int number = 0; number < blocks_to_process; ++number) {
    const Spectrum& spectrum = spectra.slot_to_empty();
    Report& report = reports.slot_to_fill();
    report.ping_match = 0;
    for (int b = 0; b < beams; ++b) {
      for (int band = 0; band < bands; ++band) {
        const std::int32_t energy = spectrum.energy[b][band];
        int level = 0;
        while (energy >> level > 1) ++level;
        report.level[b][band] = static_cast<std::uint8_t>(level);
        report.contact[b][band] = stands_out(energy, background[b][band], number);
        if (report.contact[b][band]) ++status.contacts;
      }
      for (int start = 0; start + ping_size <= frames; start += 4) {
        std::int32_t match = 0;
        for (int i = 0; i < ping_size; ++i) match += ping[i] * spectrum.beam[b][start + i];
        report.ping_match = std::max(report.ping_match, match);
      }
      ++status.heartbeat;
    }
    status.loudest = std::max(status.loudest.load(), report.ping_match);
    spectra.give_back();
    reports.pass_on();
    ++status.detected;
  }
}

std::uint8_t log_bytes[log_size];  // the logger's own
int log_end = 0;
void put(int byte) {
  log_bytes[log_end++ % log_size] = static_cast<std::uint8_t>(byte);
}

void write_logs() {
  for (int number = 0; number < blocks_to_process; ++number) {
    const Report& report = reports.slot_to_empty();
    const int start = log_end;
    put(number);
    for (int shift = 0; shift < 32; shift += 8) put(report.ping_match >> shift);
    for (int b = 0; b < beams; ++b) {
      for (int band = 0; band < bands; ++band) put(report.level[b][band] << 1 | report.contact[b][band]);
      ++status.heartbeat;
    }
    reports.give_back();
    for (auto* field : {&status.captured, &status.filtered, &status.detected, &status.contacts})
      put(*field & 0xff);
    int checksum = 0;
    for (int i = start; i < log_end; ++i) checksum = (checksum * 31 + log_bytes[i % log_size]) & 0xff;
    put(checksum);
    status.log_bytes = log_end;
    ++status.logged;
  }
}

}  // namespace

int main() {
  std::thread stages[] = {std::thread(capture), std::thread(filter), std::thread(detect)};
  write_logs();
  for (std::thread& stage : stages) stage.join();
  std::printf("%d blocks, %d contacts\n", status.logged.load(), status.contacts.load());
}
