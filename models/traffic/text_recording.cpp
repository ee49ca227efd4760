// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/text_recording.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cstring>
#include <string_view>

#include "earshot/traffic/recording_rules.h"

namespace earshot {
namespace {

constexpr const char* whole_header = "initiator,op,address,size,value";

enum Column : std::uint8_t {
  initiator_column,
  op_column,
  address_column,
  size_column,
  value_column,
  extra_column
};
constexpr std::size_t our_columns = extra_column;
const std::array<std::string_view, our_columns> column_names = {"initiator", "op", "address", "size",
                                                                "value"};

const std::vector<std::string> op_names = {"read", "write", "replace"};
const std::vector<std::string> atomic_names = {"swap",          "add",
                                               "and",           "or",
                                               "xor",           "min",
                                               "max",           "compare-and-swap",
                                               "load-reserved", "store-conditional"};

bool is_blank(char letter) {
  return letter == ' ' || letter == '\t' || letter == '\r';
}

std::string_view trimmed(std::string_view text) {
  while (!text.empty() && is_blank(text.front())) text.remove_prefix(1);
  while (!text.empty() && is_blank(text.back())) text.remove_suffix(1);
  return text;
}

// Takes the field before the next comma off the front of `rest`; false if none is left.
bool take_field(std::string_view& rest, bool& more, std::string_view& field) {
  if (!more) return false;
  const std::size_t comma = rest.find(',');
  more = comma != std::string_view::npos;
  field = trimmed(rest.substr(0, comma));
  rest.remove_prefix(more ? comma + 1 : rest.size());
  return true;
}

class TextReader : public RecordingReader {
 public:
  TextReader(std::unique_ptr<CompressedSource> source, std::uint32_t only)
      : source_(std::move(source)), only_(only) {
    read_head();
  }

  bool next(Access& access) override {
    if (at_end_) return false;
    at_end_ = true;  // stays so if a row throws
    std::string_view line;
    while (next_line(line)) {
      const std::string_view row = without_comment(line);
      if (row.empty()) continue;
      parse_row(row, access);
      initiators_seen_ |= std::uint64_t{1} << access.initiator;
      if (only_ != every_initiator && access.initiator != only_) continue;
      at_end_ = false;
      return true;
    }
    return false;
  }

  const RecordingNotes& notes() const override { return notes_; }
  std::uint64_t initiators_seen() const override { return initiators_seen_; }

 private:
  [[noreturn]] void fail(const std::string& what) const {
    throw RecordingError(source_->path() + ":" + std::to_string(line_number_) + ": " + what);
  }

  // The next line without its end; valid until the next call.
  bool next_line(std::string_view& line) {
    source_->consume(line_bytes_);
    line_bytes_ = 0;
    const unsigned char* end = nullptr;
    std::size_t searched = 0;
    while (true) {
      end = static_cast<const unsigned char*>(
          std::memchr(source_->data() + searched, '\n', source_->size() - searched));
      if (end != nullptr) break;
      searched = source_->size();
      if (searched > longest_text_line) break;
      if (source_->fill(searched + 1) == searched) break;
    }
    if (end == nullptr && source_->size() == 0) return false;
    ++line_number_;
    const std::size_t length =
        end == nullptr ? source_->size() : static_cast<std::size_t>(end - source_->data());
    if (length > longest_text_line) {
      fail("a line longer than " + std::to_string(longest_text_line) + " bytes, expected a row of " +
           whole_header);
    }
    line = std::string_view(reinterpret_cast<const char*>(source_->data()), length);
    line_bytes_ = length + (end == nullptr ? 0 : 1);
    return true;
  }

  static std::string_view without_comment(std::string_view line) {
    const void* mark = std::memchr(line.data(), '#', line.size());
    if (mark != nullptr)
      line = line.substr(0, static_cast<std::size_t>(static_cast<const char*>(mark) - line.data()));
    return trimmed(line);
  }

  void read_head() {
    std::string_view line;
    bool noted = false;
    while (next_line(line)) {
      if (line_number_ == 1 && line.substr(0, 3) == "\xef\xbb\xbf") line.remove_prefix(3);
      if (!line.empty() && line.front() == '#') {
        read_comment(line, noted);
        continue;
      }
      const std::string_view header = without_comment(line);
      if (header.empty()) continue;
      read_header(header);
      return;
    }
    if (line_number_ == 0) line_number_ = 1;
    fail(std::string("no header before the end of the file, expected ") + whole_header);
  }

  // `# order: exact|approximate` and `# note: TEXT` mean something, any other comment is the person's own.
  void read_comment(std::string_view line, bool& noted) {
    const auto begins = [&line](std::string_view start) { return line.substr(0, start.size()) == start; };
    constexpr std::string_view order = "# order:", note = "# note:";
    if (begins(order)) {
      const std::string_view word = trimmed(line.substr(order.size()));
      if (word != "exact" && word != "approximate")
        fail("order " + quoted(word) + ", expected exact or approximate");
      notes_.exact_order = word == "exact";
    } else if (begins(note)) {
      line.remove_prefix(note.size());
      if (!line.empty() && line.front() == ' ') line.remove_prefix(1);
      if (!line.empty() && line.back() == '\r') line.remove_suffix(1);
      RecordingNotes added;
      added.text = line;
      std::string problem = problem_with(added);
      if (noted) notes_.text += '\n';
      notes_.text += line;
      noted = true;
      if (problem.empty() && notes_.text.size() > most_note_bytes) problem = problem_with(notes_);
      if (!problem.empty()) fail(problem);
    }
  }

  void read_header(std::string_view header) {
    const auto control = [](char letter) {
      return static_cast<unsigned char>(letter) < 0x20 && letter != '\t';
    };
    if (std::any_of(header.begin(), header.end(), control)) {
      fail(std::string(
               "neither text nor the binary form, expected a recording: text begins with the header ") +
           whole_header);
    }
    std::string_view rest = header, field;
    for (bool more = true; take_field(rest, more, field);) {
      const auto place = std::find(column_names.begin(), column_names.end(), field);
      const auto column = static_cast<Column>(place - column_names.begin());
      if (column != extra_column && std::find(columns_.begin(), columns_.end(), column) != columns_.end()) {
        fail("column " + quoted(field) + " twice, expected the header " + whole_header);
      }
      columns_.push_back(column);
    }
    for (const Column column : {initiator_column, op_column, address_column, size_column}) {
      if (std::find(columns_.begin(), columns_.end(), column) != columns_.end()) continue;
      fail("header " + quoted(header) + " without the column '" + std::string(column_names[column]) +
           "', expected " + whole_header);
    }
    for (std::size_t i = 0; i < columns_.size(); ++i) {
      if (columns_[i] != extra_column && columns_[i] != value_column) fields_needed_ = i + 1;
    }
  }

  void parse_row(std::string_view row, Access& access) const {
    std::array<std::string_view, our_columns + 1> fields;
    std::string_view rest = row, field;
    std::size_t count = 0;
    for (bool more = true; count < columns_.size() && take_field(rest, more, field); ++count) {
      fields[columns_[count]] = field;
    }
    if (count < fields_needed_) {
      fail(std::to_string(count) + (count == 1 ? " column" : " columns") + ", expected at least " +
           std::to_string(fields_needed_) + " as in the header");
    }
    access.initiator = small_number(fields[initiator_column], initiator_column, 0, most_initiators - 1);
    access.op = parse_op(fields[op_column]);
    access.address = number(fields[address_column], address_column);
    access.size = small_number(fields[size_column], size_column, 1, largest_access);
    access.has_value = !fields[value_column].empty();
    access.value = access.has_value ? number(fields[value_column], value_column) : 0;
    if (access.has_value || access.address > ~std::uint64_t{0} - largest_access) {
      const std::string problem = problem_with(access);
      if (!problem.empty()) fail(problem);
    }
  }

  AccessOp parse_op(std::string_view word) const {
    if (word == "read") return AccessOp::read;
    if (word == "write") return AccessOp::write;
    if (word == "replace") return AccessOp::replace;
    if (std::find(atomic_names.begin(), atomic_names.end(), word) != atomic_names.end()) {
      fail("op " + quoted(word) + " is an atomic and not supported yet, expected read, write or replace");
    }
    fail("op " + quoted(word) + ", expected read, write or replace" + did_you_mean(word, op_names));
  }

  std::uint64_t number(std::string_view word, Column column) const {
    const bool is_hex = word.size() > 2 && word[0] == '0' && (word[1] == 'x' || word[1] == 'X');
    const std::string_view digits = is_hex ? word.substr(2) : word;
    std::uint64_t result = 0;
    const auto [end, error] =
        std::from_chars(digits.data(), digits.data() + digits.size(), result, is_hex ? 16 : 10);
    if (error == std::errc::result_out_of_range && end == digits.data() + digits.size()) {
      fail(std::string(column_names[column]) + " " + quoted(word) + ", expected a number below 2^64");
    }
    if (error != std::errc() || end != digits.data() + digits.size()) {
      fail(std::string(column_names[column]) + " " + quoted(word) + ", expected a decimal or 0x-hex number");
    }
    return result;
  }

  std::uint32_t small_number(std::string_view word, Column column, std::uint32_t least,
                             std::uint32_t most) const {
    const std::uint64_t result = number(word, column);
    if (result < least || result > most) {
      fail(std::string(column_names[column]) + " " + quoted(word) + ", expected " + std::to_string(least) +
           " to " + std::to_string(most));
    }
    return static_cast<std::uint32_t>(result);
  }

  std::unique_ptr<CompressedSource> source_;
  const std::uint32_t only_;
  std::uint64_t initiators_seen_ = 0;
  RecordingNotes notes_;
  std::vector<Column> columns_;  // of the header, in its order
  std::size_t fields_needed_ = 0;
  std::uint64_t line_number_ = 0;
  std::size_t line_bytes_ = 0;  // of the line handed out last, still in the source's window
  bool at_end_ = false;
};

class TextWriter : public RecordingWriter {
 public:
  TextWriter(const std::string& path, const RecordingNotes& notes, Compression compression)
      : path_(path), sink_(path, compression) {
    std::string head = notes.exact_order ? "# order: exact\n" : "# order: approximate\n";
    std::string_view rest = notes.text;
    while (!notes.text.empty()) {
      const std::size_t end = rest.find('\n');
      head.append("# note: ").append(rest.substr(0, end)) += '\n';
      if (end == std::string_view::npos) break;
      rest.remove_prefix(end + 1);
    }
    head.append(whole_header) += '\n';
    sink_.write(head.data(), head.size());
  }

  void write(const Access& access) override {
    const std::string problem = problem_with(access);
    if (!problem.empty()) throw RecordingError(path_ + ": access " + std::to_string(count_) + ": " + problem);
    if (rows_.size() - used_ < longest_row) flush();
    put(access.initiator, 10);
    put(',');
    put(name_of(access.op));
    put(",0x");
    put(access.address, 16);
    put(',');
    put(access.size, 10);
    put(',');
    if (access.has_value) {
      put("0x");
      put(access.value, 16);
    }
    put('\n');
    ++count_;
  }

  void finish() override {
    flush();
    sink_.finish();
  }

 private:
  static constexpr std::size_t longest_row = 80;

  void put(char letter) { rows_[used_++] = letter; }
  void put(const char* text) {
    while (*text != '\0') put(*text++);
  }
  void put(std::uint64_t number, int base) {
    const auto result = std::to_chars(rows_.data() + used_, rows_.data() + rows_.size(), number, base);
    used_ = static_cast<std::size_t>(result.ptr - rows_.data());
  }
  void flush() {
    sink_.write(rows_.data(), used_);
    used_ = 0;
  }

  const std::string path_;
  CompressedSink sink_;
  std::vector<char> rows_ = std::vector<char>(64 * 1024);
  std::size_t used_ = 0;
  std::uint64_t count_ = 0;
};

}  // namespace

std::unique_ptr<RecordingReader> read_text(std::unique_ptr<CompressedSource> source, std::uint32_t only) {
  return std::make_unique<TextReader>(std::move(source), only);
}

std::unique_ptr<RecordingWriter> write_text(const std::string& path, const RecordingNotes& notes,
                                            Compression compression) {
  return std::make_unique<TextWriter>(path, notes, compression);
}

}  // namespace earshot
