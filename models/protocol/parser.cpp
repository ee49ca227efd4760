// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// Words and layout of a table's text. The grammar is in README.md beside this file. What the words say
// together is judged in checker.cpp.
#include <algorithm>
#include <cctype>
#include <initializer_list>
#include <optional>
#include <sstream>

#include "earshot/protocol/nearest.h"
#include "earshot/protocol/table_text.h"

namespace earshot {
namespace {

using Words = std::vector<std::string>;

constexpr Event all_events[] = {Event::read,
                                Event::write,
                                Event::replace,
                                Event::snoop_read,
                                Event::snoop_read_exclusive,
                                Event::snoop_upgrade,
                                Event::snoop_update,
                                Event::snoop_write_through,
                                Event::snoop_io_read,
                                Event::snoop_io_write};
constexpr BusKind table_kinds[] = {BusKind::read,   BusKind::read_exclusive, BusKind::upgrade,
                                   BusKind::update, BusKind::write_through,  BusKind::write_back};
constexpr When all_conditions[] = {When::shared, When::alone, When::below, When::at_limit};

constexpr char row_layout[] = " a row STATE EVENT [WHEN] | ACTIONS | NEXT";

Words split_words(const std::string& text) {
  std::istringstream in(text);
  Words words;
  for (std::string word; in >> word;) words.push_back(word);
  return words;
}

std::vector<std::string> split_at(const std::string& text, char separator) {
  std::vector<std::string> parts(1);
  for (const char c : text) {
    if (c == separator) {
      parts.emplace_back();
    } else {
      parts.back() += c;
    }
  }
  return parts;
}

std::string join(const Words& words, const char* separator) {
  std::string joined;
  for (const std::string& word : words) joined += (joined.empty() ? "" : separator) + word;
  return joined;
}

// A word of the user's as it can stand in a message: whatever bytes the file holds, one printable line.
std::string quoted(const std::string& word) {
  std::string printable = "'";
  for (const char c : word.substr(0, 40)) {
    printable += std::isprint(static_cast<unsigned char>(c)) != 0 ? c : '?';
  }
  return printable + (word.size() > 40 ? "...'" : "'");
}

// `also` is something expected that is no single word.
std::string unknown(const std::string& what, const std::string& word, const Words& known,
                    const std::string& also = "") {
  const std::string hint = nearest(word, known);
  return "unknown " + what + " " + quoted(word) + ", expected " + join(known, ", ") +
         (also.empty() ? "" : " or" + also) + (hint.empty() ? "" : "; did you mean " + hint + "?");
}

template <typename Values>
Words names_of(const Values& values) {
  Words names;
  for (const auto value : values) names.emplace_back(name_of(value));
  return names;
}

template <typename Values>
auto find_named(const Values& values, const std::string& name)
    -> std::optional<std::decay_t<decltype(*std::begin(values))>> {
  for (const auto value : values) {
    if (name == name_of(value)) return value;
  }
  return std::nullopt;
}

bool is_name(const std::string& word) {
  return std::isalpha(static_cast<unsigned char>(word[0])) != 0 &&
         std::all_of(word.begin(), word.end(),
                     [](unsigned char c) { return std::isalnum(c) != 0 || c == '-' || c == '_'; });
}

// Reads the text line by line. A row may name a state that is declared below it, so rows wait for all states.
class Parser {
 public:
  explicit Parser(Problems& problems) : problems_(problems) {}

  TableText parse(const std::string& text) {
    const std::string mark = "\xef\xbb\xbf";  // some editors begin a file with it
    int line = 0;
    for (const std::string& raw : split_at(text.substr(text.compare(0, 3, mark) == 0 ? 3 : 0), '\n')) {
      take_line(++line, raw.substr(0, raw.find('#')));
    }
    for (const auto& [row_line, parts] : waiting_rows_) take_row(row_line, parts);
    return std::move(table_);
  }

 private:
  void fail(int line, const std::string& what) {
    problems_.add(line, what);
    table_.complete = false;
  }

  void take_line(int line, const std::string& text) {
    const Words words = split_words(text);
    if (words.empty()) return;
    if (text.find('|') != std::string::npos) {
      waiting_rows_.emplace_back(line, split_at(text, '|'));
    } else if (words[0] == "protocol") {
      take_protocol(line, words);
    } else if (words[0] == "family") {
      take_family(line, words);
    } else if (words[0] == "limit") {
      take_limit(line, words);
    } else if (words[0] == "state") {
      take_state(line, words);
    } else {
      fail(line, unknown("line", words[0], {"protocol", "family", "limit", "state"}, row_layout));
    }
  }

  // A header line stands once; says so and returns false if it is there already.
  bool first_time(int line, int& where, const std::string& keyword) {
    if (where != 0) {
      fail(line, "second line `" + keyword + "`, the first is line " + std::to_string(where));
      return false;
    }
    where = line;
    return true;
  }

  void take_protocol(int line, const Words& words) {
    if (!first_time(line, table_.name_line, "protocol")) return;
    if (words.size() != 2 || !is_name(words[1])) {
      return fail(line,
                  "expected `protocol NAME`, a name of letters, digits, - and _ that begins with a letter");
    }
    table_.name = words[1];
  }

  void take_family(int line, const Words& words) {
    if (!first_time(line, table_.family_line, "family")) return;
    if (words.size() != 2) return fail(line, "expected `family update` or `family invalidate`");
    if (words[1] == "update" || words[1] == "invalidate") {
      table_.family = words[1] == "update" ? Family::update : Family::invalidate;
    } else {
      fail(line, unknown("family", words[1], {"update", "invalidate"}));
    }
  }

  void take_limit(int line, const Words& words) {
    if (!first_time(line, table_.limit_line, "limit")) return;
    if (words.size() == 2 && words[1].size() <= 2 &&
        std::all_of(words[1].begin(), words[1].end(), [](unsigned char c) { return std::isdigit(c) != 0; })) {
      table_.limit = std::stoi(words[1]);
    }
    if (table_.limit < 1 || table_.limit > max_limit) {
      fail(line, "expected `limit N`, a whole number from 1 to " + std::to_string(max_limit));
      table_.limit = 1;
    }
  }

  void take_state(int line, const Words& words) {
    if (words.size() < 2 || !is_name(words[1])) {
      return fail(
          line,
          "expected `state NAME PROPERTY...`, a name of letters, digits, - and _ that begins with a letter");
    }
    StateText state;
    state.name = words[1];
    state.line = line;
    for (std::size_t i = 2; i < words.size(); ++i) take_property(state, words[i]);
    const int first = find_state(state.name);
    if (first >= 0) {
      const int first_line = table_.states[static_cast<std::size_t>(first)].line;
      return fail(line,
                  "state " + state.name + " again, it was declared in line " + std::to_string(first_line));
    }
    table_.states.push_back(state);
  }

  void take_property(StateText& state, const std::string& word) {
    bool* property = word == "absent"     ? &state.absent
                     : word == "readable" ? &state.readable
                     : word == "writable" ? &state.writable
                     : word == "owner"    ? &state.owner
                     : word == "counts"   ? &state.counts
                                          : nullptr;
    if (property == nullptr) {
      return fail(state.line,
                  unknown("property", word, {"absent", "readable", "writable", "owner", "counts"}));
    }
    if (*property) return fail(state.line, "property " + word + " is named twice");
    *property = true;
  }

  int find_state(const std::string& name) const {
    const auto found = std::find_if(table_.states.begin(), table_.states.end(),
                                    [&](const StateText& state) { return state.name == name; });
    return found == table_.states.end() ? -1 : static_cast<int>(found - table_.states.begin());
  }

  // The state's index; -1, and a problem, if there is no such state.
  int known_state(int line, const std::string& name) {
    const int state = find_state(name);
    if (state < 0) {
      Words names;
      for (const StateText& s : table_.states) names.push_back(s.name);
      fail(line, unknown("state", name, names));
    }
    return state;
  }

  void take_row(int line, const std::vector<std::string>& parts) {
    const Words left = split_words(parts[0]);
    const Words next = parts.size() == 3 ? split_words(parts[2]) : Words{};
    if (left.size() < 2 || left.size() > 3 || next.size() != 1) {
      return fail(line, std::string("expected") + row_layout);
    }
    RowText row;
    row.line = line;
    row.state = known_state(line, left[0]);
    row.next = known_state(line, next[0]);
    const std::optional<Event> event = find_named(all_events, left[1]);
    if (!event) fail(line, unknown("event", left[1], names_of(all_events)));
    const std::optional<When> when = left.size() == 3 ? find_named(all_conditions, left[2]) : When::always;
    if (!when) fail(line, unknown("condition", left[2], names_of(all_conditions)));
    const bool actions = take_actions(row, parts[1]);
    if (row.state < 0 || row.next < 0 || !event || !when || !actions) return;
    row.event = *event;
    row.when = *when;
    table_.rows.push_back(row);
  }

  // False, and a problem, if an action cannot be understood.
  bool take_actions(RowText& row, const std::string& text) {
    if (split_words(text).empty()) return true;
    bool understood = true;
    for (const std::string& action : split_at(text, ',')) understood &= take_action(row, split_words(action));
    return understood;
  }

  bool take_action(RowText& row, const Words& words) {
    if (words.empty()) return refuse(row.line, "an action is missing beside a comma");
    if (words[0] == "bus") return take_bus(row, words);
    bool* flag = words[0] == "again"          ? &row.again
                 : words[0] == "supply"       ? &row.supply
                 : words[0] == "write-memory" ? &row.write_memory
                 : words[0] == "take"         ? &row.take
                 : words[0] == "count"        ? &row.count
                                              : nullptr;
    if (flag == nullptr) {
      return refuse(row.line,
                    unknown("action", words[0], {"bus", "again", "supply", "write-memory", "take", "count"}));
    }
    if (words.size() > 1) {
      return refuse(row.line, "expected a comma between actions, before " + quoted(words[1]));
    }
    if (*flag) return refuse(row.line, "action " + words[0] + " is named twice");
    return *flag = true;
  }

  bool take_bus(RowText& row, const Words& words) {
    if (words.size() != 2) {
      return refuse(row.line, "expected one kind of transaction: bus " + join(names_of(table_kinds), "|"));
    }
    if (row.uses_bus) return refuse(row.line, "a row issues at most one bus transaction");
    const std::optional<BusKind> kind = find_named(table_kinds, words[1]);
    if (!kind) return refuse(row.line, unknown("bus transaction", words[1], names_of(table_kinds)));
    row.uses_bus = true;
    row.bus = *kind;
    return true;
  }

  bool refuse(int line, const std::string& what) {
    fail(line, what);
    return false;
  }

  Problems& problems_;
  TableText table_;
  std::vector<std::pair<int, std::vector<std::string>>> waiting_rows_;
};

}  // namespace

const char* name_of(When when) {
  // clang-format off
  switch (when) {
    case When::always:   return "";
    case When::shared:   return "shared";
    case When::alone:    return "alone";
    case When::below:    return "below";
    case When::at_limit: return "at-limit";
  }
  // clang-format on
  return "?";
}

void Problems::add(int line, const std::string& what) {
  // One row can name the same unknown state twice; once is enough.
  const bool known = std::any_of(found_.begin(), found_.end(), [&](const Problem& problem) {
    return problem.line == line && problem.what == what;
  });
  if (!known) found_.push_back({line, what});
}

std::string Problems::text() const {
  std::vector<Problem> sorted = found_;
  std::stable_sort(sorted.begin(), sorted.end(),
                   [](const Problem& a, const Problem& b) { return a.line < b.line; });
  std::string text;
  for (const Problem& problem : sorted) {
    text += (text.empty() ? "" : "\n") + origin_ + ":" + std::to_string(problem.line) + ": " + problem.what;
  }
  return text;
}

TableText read_table_text(const std::string& text, Problems& problems) {
  return Parser(problems).parse(text);
}

}  // namespace earshot
