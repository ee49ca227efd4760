// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// The engine of a CoherentCache in arbitrated timing: accesses under way, the misses they wait for, and the victims on
// their way to memory. Internal to the cache; the contract is CoherentCache's.
//
// An access is looked up after hit_time. If an earlier access still works on its line, it joins that miss; else it
// hits; else it starts a miss, for which it needs a free miss, a place in the set that no other miss has taken, a free
// write-back slot if the victim is owned, and the line not on its way out. Lacking one of these it waits, and every
// later access to the same line behind it.
#pragma once

#include <deque>
#include <memory>
#include <string>
#include <vector>

#include "earshot/cache/coherent_cache.h"

namespace earshot {

class CoherentCache::Arbitrated {
 public:
  explicit Arbitrated(CoherentCache& cache);

  // CPU side. block(): the access has been looked up already, if it is to be; waits until it is done.
  void block(tlm::tlm_generic_payload& payload, AccessRequest request);
  tlm::tlm_sync_enum forward(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase, sc_core::sc_time& time);
  // No earlier access to the line is under way.
  bool idle_for(std::uint64_t line) const { return waiting_.empty() && (in_use_.empty() || find_miss(line) == nullptr); }

  // Bus side.
  bool granted(BusTransaction& transaction);
  void effected(BusTransaction& transaction);
  void finished(BusTransaction& transaction);
  Slot* leaving(std::uint64_t line, std::uint8_t*& bytes);
  void snooped(std::uint64_t line);  // a victim, which may have changed state
  const Slot* leaving(std::uint64_t line) const;
  // The bytes of a line that is on its way to memory (`owner`) or from it; null if it is neither.
  std::uint8_t* in_flight(std::uint64_t line, bool& owner);
  std::uint64_t owned_victims() const;

  void replace(std::uint64_t line);
  std::uint64_t flush(sc_core::sc_time& delay);

  std::string waiting() const;
  std::vector<std::string> broken_laws() const;
  const QueueMeter& misses() const { return miss_meter_; }
  const QueueMeter& victims() const { return victim_meter_; }
  const QueueMeter& accesses() const { return access_meter_; }

 private:
  struct Access {
    tlm::tlm_generic_payload* payload = nullptr;  // null: its process was killed
    bool blocking = false;
    bool done = false;
    bool write = false;
    AccessRequest request = AccessRequest::nothing;
    Pieces pieces;
    Piece piece;                  // the one under way
    Picoseconds start = 0;
    Picoseconds accounted = 0;    // progress.parts cover [start, accounted)
    Picoseconds queued = 0;       // since when it waits for a place
    Progress progress;
  };
  // What the bus is asked for.
  struct Job : BusTransaction {
    enum class What { miss, write_back, uncached } what = What::miss;
  };
  struct Miss : Job {
    Slot* place = nullptr;        // pinned; holds the line or receives it. Null: the table allocates nothing
    StateId judged = absent;      // the state it was granted in
    bool performed = false;       // the first access has taken effect
    Picoseconds since = 0;
    std::deque<Access*> chain;    // the accesses it is for, in order
    std::vector<std::uint8_t> buffer;
  };
  struct WriteBack : Job {
    bool used = false;
    bool refused = false;         // by memory: it stays
    Slot slot;                    // line and state, snooped until granted
    StateId before = absent;      // state at the grant, should memory refuse
    Picoseconds since = 0;
    std::vector<std::uint8_t> bytes;
  };
  struct Uncached : Job {
    Access* access = nullptr;
    // Of a blocking access: its process may be killed, and the payload with it.
    tlm::tlm_generic_payload copy;
    std::vector<std::uint8_t> data, enables;
  };

  // CPU side.
  Access& start(tlm::tlm_generic_payload& payload, bool blocking, AccessRequest request, Picoseconds when);
  Picoseconds lookup_time(AccessRequest request) const { return request == AccessRequest::cached ? cache_.hit_ps_ : 0; }
  void look_up(Access* access);
  void begin(Access& access);
  void begin_uncached(Access& access);
  void finish_uncached(Uncached& job);
  void next_piece(Access& access);
  void complete(Access& access);
  void recycle(Access& access);
  void next_response(Arbitrated*);
  void send_response();
  void end_response(const sc_core::sc_time& time);
  void response_ended(Access* access);
  void response_ended_later(Access* access);
  void end_request(Access& access);
  tlm::tlm_sync_enum misuse(const std::string& what) const;

  // Lookup.
  void settle_in(Access& access);
  bool admit(Access& access);
  bool refuse(Access& access, tlm::tlm_response_status status);
  void charge_wait(Access& access);
  void retry();

  // Misses.
  Miss* find_miss(std::uint64_t line) const;
  Miss& new_miss(Access& first, Slot* place);
  bool judge(Miss& miss);
  void advance(Miss& miss);
  void release(Miss& miss);
  void miss_finished(Miss& miss);
  void charge(Miss& miss);
  void perform(Access& access, Slot* slot, std::uint8_t* bytes);
  void start_over(Miss& miss);

  // Victims.
  WriteBack* free_slot() const;
  bool slots_lost() const;
  bool owned(const Slot& slot) const;
  void depart(Slot& slot);
  bool write_back_granted(WriteBack& victim);
  void write_back_finished(WriteBack& victim);
  void release(WriteBack& victim);
  void drop(Slot& slot, std::uint64_t line);
  void wait_for_change();

  CoherentCache& cache_;
  Agenda& agenda_;

  std::vector<std::unique_ptr<Access>> accesses_;
  std::vector<Access*> unused_accesses_;
  std::deque<Access*> waiting_;                 // for a place
  std::vector<std::unique_ptr<Miss>> misses_;
  std::vector<Miss*> in_use_;
  std::vector<Miss*> unused_misses_;
  std::vector<std::unique_ptr<WriteBack>> victims_;
  std::vector<std::unique_ptr<Uncached>> uncached_;
  std::vector<Uncached*> unused_uncached_;

  // nb_transport: at most one request and one response phase at a time.
  Access* requesting_ = nullptr;
  Access* responding_ = nullptr;
  bool response_ending_ = false;                // END_RESP is there, its time to come
  std::deque<Access*> responses_;
  std::vector<const tlm::tlm_generic_payload*> non_blocking_;  // in flight

  sc_core::sc_event done_;              // a blocking access is
  sc_core::sc_event changed_;        // a miss or a write-back slot became free
  unsigned change_waiters_ = 0;

  QueueMeter miss_meter_, victim_meter_, access_meter_;
  std::uint64_t parts_wrong_ = 0;               // accesses whose parts did not add up
};

}  // namespace earshot
