// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/pattern.h"

#include <algorithm>

#include "earshot/traffic/seeded_random.h"
#include "earshot/traffic/recording_rules.h"

namespace earshot {
namespace {

enum class PatternKind : std::uint8_t {
  private_lines,
  read_shared,
  producer_consumer,
  migratory,
  false_sharing,
  uniform
};

constexpr std::uint32_t most_lines = 1u << 20;

// Consecutive initiators' states would otherwise be steps of one and the same sequence.
SplitMix64 generator_of(std::uint64_t seed, std::uint32_t initiator) {
  return SplitMix64(SplitMix64::mix(seed ^ SplitMix64::mix(initiator + 1)));
}

class Pattern : public AccessSource {
 public:
  Pattern(const PatternConfig& config, PatternKind kind, std::uint32_t only)
      : config_(config),
        kind_(kind),
        words_per_line_(config.line_bytes / config.word_bytes),
        first_(only == every_initiator ? 0 : only),
        last_(only == every_initiator ? config.initiators - 1 : only),
        initiator_(first_) {
    if (first_ >= config_.initiators) config_.accesses = 0;
    for (std::uint32_t i = first_; i <= last_; ++i) generators_.push_back(generator_of(config.seed, i));
  }

  bool next(Access& access) override {
    if (round_ == config_.accesses) return false;
    access = Access();
    access.initiator = initiator_;
    access.size = config_.word_bytes;
    choose(access, generators_[initiator_ - first_]);
    if (access.op == AccessOp::write) {
      access.has_value = true;
      access.value = ((round_ + 1) * most_initiators + initiator_) & largest_value(config_.word_bytes);
    }
    if (initiator_++ == last_) {
      initiator_ = first_;
      ++round_;
    }
    return true;
  }

 private:
  void choose(Access& access, SplitMix64& random) const {
    const std::uint32_t initiator = access.initiator;
    switch (kind_) {
      case PatternKind::private_lines:
        access.op = read_or_write(random);
        access.address = random_word(random) + std::uint64_t{initiator} * config_.lines * config_.line_bytes;
        return;
      case PatternKind::read_shared:
        access.op = initiator == 0 ? read_or_write(random) : AccessOp::read;
        access.address = random_word(random);
        return;
      case PatternKind::producer_consumer:
        access.op = initiator == 0 ? AccessOp::write : AccessOp::read;
        access.address = word_at(round_ / words_per_line_ % config_.lines, round_ % words_per_line_);
        return;
      case PatternKind::migratory:
        access.op = round_ % 2 == 0 ? AccessOp::read : AccessOp::write;
        access.address = word_at((round_ / 2 % config_.lines + config_.lines - initiator) % config_.lines, 0);
        return;
      case PatternKind::false_sharing:
        access.op = read_or_write(random);
        access.address = word_at(random.below(config_.lines), initiator);
        return;
      case PatternKind::uniform:
        access.op = read_or_write(random);
        access.address = random_word(random);
        return;
    }
  }

  AccessOp read_or_write(SplitMix64& random) const {
    return random.below(100) < config_.write_percent ? AccessOp::write : AccessOp::read;
  }

  std::uint64_t word_at(std::uint64_t line, std::uint64_t word) const {
    return config_.base + line * config_.line_bytes + word * config_.word_bytes;
  }

  std::uint64_t random_word(SplitMix64& random) const {
    const std::uint32_t line = random.below(config_.lines);
    return word_at(line, random.below(words_per_line_));
  }

  PatternConfig config_;
  const PatternKind kind_;
  const std::uint32_t words_per_line_;
  const std::uint32_t first_, last_;    // initiators to yield
  std::vector<SplitMix64> generators_;  // of those
  std::uint32_t initiator_;             // of the next access
  std::uint64_t round_ = 0;             // of the next access: how many each has made before
};

bool is_power_of_two(std::uint32_t number) {
  return number != 0 && (number & (number - 1)) == 0;
}

// Collects one line for each rule that is broken.
class Problems {
 public:
  void require(bool held, const std::string& key, const std::string& value, const std::string& expected) {
    if (!held) text_ += (text_.empty() ? "" : "\n") + key + " " + value + ", expected " + expected;
  }
  void require(bool held, const std::string& key, std::uint64_t value, const std::string& expected) {
    require(held, key, std::to_string(value), expected);
  }
  const std::string& text() const { return text_; }

 private:
  std::string text_;
};

std::string listed(const std::vector<std::string>& names) {
  std::string list;
  for (const std::string& name : names) list += (list.empty() ? "" : ", ") + name;
  return list;
}

PatternKind checked(const PatternConfig& config) {
  Problems problems;
  const auto& kinds = pattern_kinds();
  const auto found = std::find(kinds.begin(), kinds.end(), config.kind);
  const auto kind = static_cast<PatternKind>(found - kinds.begin());
  problems.require(found != kinds.end(), "kind", quoted(config.kind),
                   "one of " + listed(kinds) + did_you_mean(config.kind, kinds));
  const bool initiators_fit = config.initiators >= 1 && config.initiators <= most_initiators;
  problems.require(initiators_fit, "initiators", config.initiators,
                   "1 to " + std::to_string(most_initiators));
  problems.require(config.write_percent <= 100, "write_percent", config.write_percent, "0 to 100");
  const bool word_fits = is_power_of_two(config.word_bytes) && config.word_bytes <= 8;
  problems.require(word_fits, "word_bytes", config.word_bytes, "1, 2, 4 or 8");
  const bool line_fits =
      is_power_of_two(config.line_bytes) && config.line_bytes >= 8 && config.line_bytes <= 256;
  problems.require(line_fits, "line_bytes", config.line_bytes, "a power of two from 8 to 256");
  const bool lines_fit = config.lines >= 1 && config.lines <= most_lines;
  problems.require(lines_fit, "lines", config.lines, "1 to " + std::to_string(most_lines));
  if (line_fits) {
    problems.require(config.base % config.line_bytes == 0, "base", config.base,
                     "a multiple of line_bytes (" + std::to_string(config.line_bytes) + ")");
  }
  if (initiators_fit && line_fits && lines_fit) {
    const std::uint64_t groups = kind == PatternKind::private_lines ? config.initiators : 1;
    const std::uint64_t most = 0 - groups * config.lines * config.line_bytes;
    problems.require(config.base <= most, "base", config.base,
                     "at most " + std::to_string(most) + " so that all lines lie below 2^64");
  }
  if (kind == PatternKind::producer_consumer) {
    problems.require(config.initiators >= 2, "initiators", config.initiators,
                     "at least 2 for producer-consumer: one writes, the others read");
  }
  if (kind == PatternKind::migratory && initiators_fit) {
    problems.require(
        config.lines >= config.initiators, "lines", config.lines,
        "at least the number of initiators (" + std::to_string(config.initiators) + ") for migratory");
  }
  if (kind == PatternKind::false_sharing && initiators_fit && line_fits && word_fits) {
    problems.require(
        config.line_bytes / config.word_bytes >= config.initiators, "line_bytes", config.line_bytes,
        "at least initiators * word_bytes (" + std::to_string(config.initiators * config.word_bytes) +
            ") for false-sharing: a word of each line for each initiator");
  }
  if (!problems.text().empty()) throw PatternError(problems.text());
  return kind;
}

}  // namespace

const std::vector<std::string>& pattern_kinds() {
  static const std::vector<std::string> kinds = {"private",   "read-shared",   "producer-consumer",
                                                 "migratory", "false-sharing", "uniform"};
  return kinds;
}

std::unique_ptr<AccessSource> make_pattern(const PatternConfig& config, std::uint32_t only) {
  const PatternKind kind = checked(config);
  return std::make_unique<Pattern>(config, kind, only);
}

}  // namespace earshot
