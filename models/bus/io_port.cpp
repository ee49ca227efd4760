// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/io_port.h"

#include <algorithm>
#include <cstring>
#include <sstream>

#include "earshot/bus/copy_bytes.h"
#include "earshot/bus/held_bus.h"
#include "earshot/version_check.h"

namespace earshot {

struct IoPort::Job : BusTransaction {
  bool abandoned = false;  // its process was killed
  bool done = false;
  std::vector<std::uint8_t> data, enables;
  tlm::tlm_generic_payload copy;  // of an uncached access
};

IoPort::IoPort(sc_core::sc_module_name name, HeadersVersion headers)
    : sc_module((require_same_version(headers, name), name)) {
  io_socket.register_b_transport(this, &IoPort::b_transport);
  io_socket.register_transport_dbg(this, &IoPort::transport_dbg);
  io_socket.register_get_direct_mem_ptr(this, &IoPort::get_direct_mem_ptr);
  bus_socket.bind(static_cast<SnoopInterface&>(*this));
}

IoPort::~IoPort() = default;

// ---- The initiator's side

void IoPort::b_transport(tlm::tlm_generic_payload& payload, sc_core::sc_time& delay) {
  payload.set_dmi_allowed(false);
  const bool annotated = timing_ == BusTiming::annotated;
  if (!annotated) {
    if (delay != sc_core::SC_ZERO_TIME) sc_core::wait(delay);
    delay = sc_core::SC_ZERO_TIME;
  }
  Progress progress;
  const AccessRequest request = request_of(payload, *map_);
  switch (request) {
    case AccessRequest::nothing:
      payload.set_response_status(tlm::TLM_OK_RESPONSE);
      return;
    case AccessRequest::no_data:
      progress.status = tlm::TLM_BURST_ERROR_RESPONSE;
      break;
    case AccessRequest::no_window:
      progress.status = tlm::TLM_ADDRESS_ERROR_RESPONSE;
      break;
    case AccessRequest::uncached:
      if (annotated) {
        bus_socket->pass_through(payload, delay, progress.parts);
        progress.status = payload.get_response_status();
      } else {
        pass_by_grant(payload, progress);
      }
      break;
    case AccessRequest::cached: {
      if (payload.get_streaming_width() == 0)
        oddities_.remark(Oddity::streaming_width_0, name(), "is sent a streaming width of 0: taken as the data length");
      Pieces pieces(payload, bus_socket->line_bytes());
      for (Piece piece; progress.status == tlm::TLM_OK_RESPONSE && pieces.next(piece);) {
        if (annotated)
          access_now(piece, delay, progress);
        else
          access_by_grant(piece, progress);
      }
    }
  }
  payload.set_response_status(progress.status);
  if (progress.status != tlm::TLM_OK_RESPONSE) {
    ++totals_.errors;
  } else if (request == AccessRequest::uncached) {
    ++totals_.uncached;
  } else {
    ++(payload.is_write() ? totals_.writes : totals_.reads);
    totals_.latency.add(progress.parts.total());
    totals_.parts.add(progress.parts);
  }
}

unsigned IoPort::transport_dbg(tlm::tlm_generic_payload& payload) {
  const unsigned done = bus_socket->debug(payload);
  if (observer_ != nullptr && payload.is_write() && done > 0)
    observer_->poked(payload.get_address(), payload.get_data_ptr(), done);
  return done;
}

bool IoPort::get_direct_mem_ptr(tlm::tlm_generic_payload& payload, tlm::tlm_dmi& dmi) {
  return bus_socket->direct_memory(payload, dmi);
}

// Annotated timing.
void IoPort::access_now(const Piece& piece, sc_core::sc_time& delay, Progress& progress) {
  const HeldBus held(*bus_socket.operator->(), delay, progress.parts[LatencyPart::wait_for_grant]);
  BusTransaction transaction;
  transaction.kind = piece.write ? BusKind::io_write : BusKind::io_read;
  transaction.requester = port_;
  transaction.line = piece.line;
  transaction.offset = piece.offset;
  transaction.length = piece.length;
  transaction.byte_enable = piece.byte_enable;
  transaction.line_data = piece.data;
  transaction.word = piece.data;
  bus_socket->transact(transaction, delay);
  progress.parts.add(transaction.parts);
  progress.status = transaction.status;
  if (observer_ == nullptr || progress.status != tlm::TLM_OK_RESPONSE) return;
  tell(transaction, piece.data);
  observer_->settled(piece.line);
}

// Arbitrated timing.
void IoPort::access_by_grant(const Piece& piece, Progress& progress) {
  Job& job = new_job();
  job.kind = piece.write ? BusKind::io_write : BusKind::io_read;
  job.line = piece.line;
  job.offset = piece.offset;
  job.length = piece.length;
  job.data.assign(piece.data, piece.data + piece.length);
  job.enables.clear();
  if (piece.byte_enable != nullptr) job.enables.assign(piece.byte_enable, piece.byte_enable + piece.length);
  job.byte_enable = job.enables.empty() ? nullptr : job.enables.data();
  job.line_data = job.data.data();
  job.word = job.data.data();
  job.io = nullptr;
  wait_for(job);
  progress.parts.add(job.timeline.since(job.timeline.begin()));
  progress.status = job.status;
  if (!piece.write && job.status == tlm::TLM_OK_RESPONSE)
    copy_enabled(piece.data, job.data.data(), piece.length, piece.byte_enable);
  unused_.push_back(&job);
}

void IoPort::pass_by_grant(tlm::tlm_generic_payload& payload, Progress& progress) {
  Job& job = new_job();
  job.kind = payload.is_write() ? BusKind::io_write : BusKind::io_read;
  job.line = payload.get_address();
  job.data.resize(payload.get_data_length());
  job.enables.resize(payload.get_byte_enable_ptr() == nullptr ? 0 : payload.get_byte_enable_length());
  job.copy.set_data_ptr(job.data.data());
  job.copy.set_byte_enable_ptr(job.enables.empty() ? nullptr : job.enables.data());
  job.copy.deep_copy_from(payload);
  job.io = &job.copy;
  wait_for(job);
  progress.parts.add(job.timeline.since(job.timeline.begin()));
  payload.update_original_from(job.copy);
  job.copy.free_all_extensions();
  progress.status = job.status;
  unused_.push_back(&job);
}

// Asks for the bus and waits until all is done. If the process is killed, the job goes on alone.
void IoPort::wait_for(Job& job) {
  struct Caller {
    Job& job;
    ~Caller() { job.abandoned = !job.done; }
  } caller{job};
  job.done = false;
  bus_socket->request(job);
  while (!job.done) sc_core::wait(done_);
}

IoPort::Job& IoPort::new_job() {
  if (unused_.empty()) {
    jobs_.push_back(std::make_unique<Job>());
    unused_.push_back(jobs_.back().get());
  }
  Job& job = *unused_.back();
  unused_.pop_back();
  job.requester = port_;
  job.abandoned = false;
  return job;
}

// ---- The bus's side

unsigned IoPort::attached(int port, const AddressMap& map, BusTiming timing) {
  port_ = port;
  map_ = &map;
  timing_ = timing;
  return 0;
}

void IoPort::effected(BusTransaction& transaction) {
  if (observer_ != nullptr) tell(transaction, static_cast<Job&>(transaction).data.data());
}

void IoPort::finished(BusTransaction& transaction) {
  Job& job = static_cast<Job&>(transaction);
  job.done = true;
  if (!job.abandoned) {
    done_.notify();
    return;
  }
  job.copy.free_all_extensions();
  unused_.push_back(&job);
}

void IoPort::settled(std::uint64_t line) {
  if (observer_ != nullptr) observer_->settled(line);
}

// Tells the observer of each run of enabled bytes; `bytes` are those of [offset, offset + length).
void IoPort::tell(const BusTransaction& transaction, const std::uint8_t* bytes) const {
  for_enabled_runs(transaction.length, transaction.byte_enable, [&](std::uint32_t first, std::uint32_t count) {
    observer_->accessed(port_, transaction.kind == BusKind::io_write, transaction.line + transaction.offset + first,
                        bytes + first, count);
  });
}

std::string IoPort::waiting() const {
  std::ostringstream text;
  for (const auto& job : jobs_)
    if (std::find(unused_.begin(), unused_.end(), job.get()) == unused_.end())
      text << name() << ": " << name_of(job->kind) << " at 0x" << std::hex << job->line + job->offset << std::dec
           << " since " << from_ps(job->timeline.begin()) << " waits for the bus\n";
  return text.str();
}

void IoPort::invalidate_direct_memory(std::uint64_t first, std::uint64_t last) {
  io_socket->invalidate_direct_mem_ptr(first, last);
}

}  // namespace earshot
