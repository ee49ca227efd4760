// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "outside/promela.h"

#include <sstream>

namespace earshot {
namespace {

class Writer {
 public:
  Writer(const Table& table, int caches) : table_(table), caches_(caches) {}

  std::string write() {
    declare();
    for (const BusKind kind : {BusKind::read, BusKind::read_exclusive, BusKind::upgrade, BusKind::update,
                               BusKind::write_through}) {
      write_transaction(kind);
    }
    if (table_.serves_io()) {
      for (const BusKind kind : {BusKind::io_read, BusKind::io_write}) write_transaction(kind);
    }
    write_others_stale();
    for (const Event event : {Event::read, Event::write, Event::replace}) write_event(event);
    write_check();
    write_process();
    return out_.str();
  }

 private:
  // Scratch variables are hidden: they are no part of the state that Spin stores. (They become C globals of
  // its generated program, which has names of its own.)
  void declare() {
    out_ << "/* " << table_.name() << ", " << caches_ << " caches */\n"
         << "byte st[" << caches_ << "];\n"
         << "bit fresh[" << caches_ << "];\n"
         << "bit mem = 1;\n"
         << "hidden byte j, rounds, owners, copies, writable_seen, shared, supplied, good, tomem, more, "
            "row_missing;\n\n";
  }

  // What all caches but `me` do on one transaction. Afterwards: shared; for a fetch also `good`, the
  // freshness of the line that arrives.
  void write_transaction(BusKind kind) {
    const bool fetch = kind == BusKind::read || kind == BusKind::read_exclusive || kind == BusKind::io_read;
    const bool word = kind == BusKind::update || kind == BusKind::write_through || kind == BusKind::io_write;
    out_ << "inline bus_" << int(kind) << "(me) {  /* " << name_of(kind) << " */\n"
         << "  shared = 0; supplied = 0; good = 1; tomem = 0;\n"
         << "  for (j : 0 .. " << caches_ - 1 << ") {\n"
         << "    if\n"
         << "    :: (j == me || st[j] == 0) -> skip\n"
         << "    :: else ->\n"
         << "       if\n";
    for (std::size_t id = 1; id < table_.states().size(); ++id) {
      const Row& row = table_.row(static_cast<StateId>(id), snoop_event(kind), true);
      if (!row.defined) continue;
      out_ << "       :: (st[j] == " << id << ") -> ";
      if (row.supply) out_ << "supplied = 1; good = good & fresh[j]; ";
      if (row.supply && row.write_memory) out_ << "tomem = 1; ";
      if (word && !row.take) out_ << "fresh[j] = 0; ";
      if (row.next == absent) out_ << "fresh[j] = 0; ";
      out_ << "st[j] = " << int(row.next) << "\n";
    }
    out_ << "       :: else -> row_missing = 1\n"
         << "       fi;\n"
         << "       shared = shared | (st[j] != 0)\n"
         << "    fi\n"
         << "  }\n";
    if (fetch) {
      out_ << "  if :: tomem -> mem = good :: else -> skip fi;\n"
           << "  if :: supplied -> skip :: else -> good = mem fi\n";
    } else if (kind == BusKind::io_write) {
      out_ << "  if :: tomem -> mem = good :: else -> skip fi\n";  // the word itself leaves memory as fresh as it was
    } else {
      out_ << "  skip\n";
    }
    out_ << "}\n\n";
  }

  void write_others_stale() {
    out_ << "inline others_stale(me) {\n"
         << "  for (j : 0 .. " << caches_ - 1 << ") {\n"
         << "    if :: (j != me) -> fresh[j] = 0 :: else -> skip fi\n"
         << "  }\n"
         << "}\n\n";
  }

  void write_event(Event event) {
    out_ << "inline do_" << name_of(event) << "(me) {\n"
         << "  more = 1; rounds = 0;\n"
         << "  do\n"
         << "  :: (more && !row_missing) ->\n"
         << "     more = 0; rounds++;\n"
         << "     assert(rounds <= " << table_.states().size() + 1
         << ");  /* not judged again without end */\n"
         << "     if\n";
    for (std::size_t id = 0; id < table_.states().size(); ++id) {
      const Row& issued = table_.row(static_cast<StateId>(id), event, false);
      if (!issued.defined) continue;
      out_ << "     :: (st[me] == " << id << ") ->\n";
      if (!issued.uses_bus) {
        write_row(issued, event);
      } else if (issued.bus == BusKind::write_back) {
        out_ << "        mem = fresh[me];\n";
        write_row(issued, event);
      } else {
        out_ << "        bus_" << int(issued.bus) << "(me);\n"
             << "        if\n"
             << "        :: row_missing -> skip\n"
             << "        :: (!row_missing && shared) ->\n";
        write_row(table_.row(static_cast<StateId>(id), event, true), event);
        out_ << "        :: (!row_missing && !shared) ->\n";
        write_row(issued, event);
        out_ << "        fi\n";
      }
    }
    out_ << "     :: else -> row_missing = 1\n"
         << "     fi\n"
         << "  :: else -> break\n"
         << "  od;\n"
         << "  assert(!row_missing);  /* every reachable state and event has a row */\n";
    if (event == Event::read) out_ << "  assert(st[me] != 0);  /* the read is answered */\n";
    if (event == Event::replace) out_ << "  assert(st[me] == 0);  /* the line is given up */\n";
    out_ << "  check()\n"
         << "}\n\n";
  }

  // The local half of a row: the fetched line, the written value, the next state.
  void write_row(const Row& row, Event event) {
    const bool fetch = row.uses_bus && (row.bus == BusKind::read || row.bus == BusKind::read_exclusive);
    const bool word = row.uses_bus && (row.bus == BusKind::update || row.bus == BusKind::write_through);
    if (fetch) out_ << "        fresh[me] = good;\n";
    if (event == Event::write && !row.again) {
      if (!word) out_ << "        others_stale(me);\n";
      if (!row.uses_bus || row.bus != BusKind::write_through) out_ << "        mem = 0;\n";
    }
    if (row.next == absent) out_ << "        fresh[me] = 0;\n";
    if (row.again) out_ << "        more = 1;\n";
    out_ << "        st[me] = " << int(row.next) << "\n";
  }

  void write_check() {
    out_ << "inline check() {\n"
         << "  owners = 0; copies = 0; writable_seen = 0;\n"
         << "  for (j : 0 .. " << caches_ - 1 << ") {\n"
         << "    if :: (" << states_with(&State::owner) << ") -> owners++ :: else -> skip fi;\n"
         << "    if :: (" << states_with(&State::writable) << ") -> writable_seen = 1 :: else -> skip fi;\n"
         << "    if :: (st[j] != 0) -> copies++ :: else -> skip fi;\n"
         << "    assert(!(" << states_with(&State::readable)
         << ") || fresh[j])  /* readable copies are fresh */\n"
         << "  }\n"
         << "  assert(owners <= 1);\n"
         << "  assert(!writable_seen || copies == 1);  /* a silently writable copy is the only one */\n"
         << "  assert(owners == 1 || mem)       /* without an owner memory is fresh */\n"
         << "}\n\n";
  }

  // The condition that cache j stands in a state with a property.
  std::string states_with(bool State::*property) const {
    std::string condition = "false";
    for (std::size_t id = 0; id < table_.states().size(); ++id) {
      if (table_.states()[id].*property) condition += " || st[j] == " + std::to_string(id);
    }
    return condition;
  }

  void write_process() {
    out_ << "active proctype line() {\n"
         << "  do\n";
    for (int cache = 0; cache < caches_; ++cache) {
      out_ << "  :: d_step { true -> do_read(" << cache << ") }\n"
           << "  :: d_step { true -> do_write(" << cache << ") }\n"
           << "  :: d_step { (st[" << cache << "] != 0) -> do_replace(" << cache << ") }\n";
    }
    if (table_.serves_io()) {
      const int nobody = 255;
      out_ << "  :: d_step { true -> bus_" << int(BusKind::io_read) << "(" << nobody
           << "); assert(!row_missing && good); check() }\n"
           << "  :: d_step { true -> bus_" << int(BusKind::io_write) << "(" << nobody
           << "); assert(!row_missing); check() }\n";
    }
    out_ << "  od\n"
         << "}\n";
  }

  const Table& table_;
  const int caches_;
  std::ostringstream out_;
};

}  // namespace

std::string promela(const Table& table, int caches) {
  return Writer(table, caches).write();
}

}  // namespace earshot
