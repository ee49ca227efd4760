// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/window_port.h"

#include <algorithm>
#include <sstream>

#include "earshot/timing/kernel.h"

namespace earshot {
namespace {

// Extensions are lent to a piece; what it has itself stays.
void lend_extensions(const tlm::tlm_generic_payload& whole, tlm::tlm_generic_payload& piece) {
  for (unsigned i = 0; i < tlm::max_num_extensions(); ++i)
    if (piece.get_extension(i) == nullptr) piece.set_extension(i, whole.get_extension(i));
}
void take_extensions_back(const tlm::tlm_generic_payload& whole, tlm::tlm_generic_payload& piece) {
  for (unsigned i = 0; i < tlm::max_num_extensions(); ++i)
    if (piece.get_extension(i) == whole.get_extension(i)) piece.set_extension(i, nullptr);
}

}  // namespace

WindowAccess& WindowAccessPool::acquire() {
  if (unused_.empty()) {
    all_.push_back(std::make_unique<WindowAccess>(static_cast<tlm::tlm_mm_interface*>(this)));
    unused_.push_back(all_.back().get());
  }
  WindowAccess& access = *unused_.back();
  unused_.pop_back();
  access.acquire();
  access.times.queue = 0;
  access.set_response_status(tlm::TLM_INCOMPLETE_RESPONSE);
  access.set_dmi_allowed(false);
  return access;
}

void WindowAccessPool::free(tlm::tlm_generic_payload* payload) {
  payload->reset();
  unused_.push_back(static_cast<WindowAccess*>(payload));
}

WindowPort::WindowPort(sc_core::sc_module_name name, const Window& window, Listener& listener)
    : sc_module(name), window_(window), listener_(listener) {
  socket.bind(*this);
  EARSHOT_HAS_PROCESS(WindowPort);
  SC_METHOD(work);
  sensitive << agenda_.due();
  dont_initialize();
}

void WindowPort::send(WindowAccess& access) {
  access.whole = nullptr;
  access.answered = false;
  access.pieces.start(window_, access);
  if (access.pieces.done()) {  // no byte is enabled
    access.sent = access.ended = std::max(now_ps(), access.ready);
    access.set_response_status(tlm::TLM_OK_RESPONSE);
    listener_.answered(access);
  } else if (access.pieces.as_it_is()) {
    access.pieces.next(access);
    enqueue(access);
  } else {
    send_piece(&access);
  }
}

void WindowPort::send_piece(WindowAccess* whole) {
  WindowAccess& piece = pieces_.acquire();
  piece.whole = whole;
  piece.ready = whole->ready;
  whole->pieces.next(piece);
  lend_extensions(*whole, piece);
  enqueue(piece);
}

// The next is sent when this one's answer is there. What the later ones wait for the target is its queue, too.
void WindowPort::piece_answered(WindowAccess& piece, WindowAccess& whole) {
  if (!whole.answered) whole.sent = whole.ended = piece.sent;
  whole.answered = true;
  whole.times.queue += piece.sent - whole.ended + std::min(piece.times.queue, piece.ended - piece.sent);
  whole.ended = piece.ended;
  whole.set_response_status(piece.get_response_status());
  whole.set_dmi_allowed(piece.is_dmi_allowed());
  take_extensions_back(whole, piece);
  piece.release();
  if (whole.is_response_ok() && !whole.pieces.done())
    agenda_.at<&WindowPort::send_piece>(whole.ended, this, &whole);
  else
    listener_.answered(whole);
}

void WindowPort::enqueue(WindowAccess& access) {
  access.asked = now_ps();
  queue_.push_back(&access);
  queue_meter_.enter(access.asked);
  send_next();
}

void WindowPort::send_next() {
  if (listener_.on_backward_path) {
    if (!busy_ && !queue_.empty()) agenda_.at<&WindowPort::send_later>(now_ps(), this, this);
    return;
  }
  while (!busy_ && !queue_.empty()) {
    WindowAccess& access = *queue_.front();
    queue_.pop_front();
    begin(access);
  }
}

void WindowPort::begin(WindowAccess& access) {
  const Picoseconds now = now_ps();
  queue_meter_.leave(now, access.asked);
  target_meter_.enter(now);
  access.asked = now;
  access.sent = std::max(now, access.ready);
  access.requesting = true;
  access.answered = false;
  busy_ = true;
  at_target_.push_back(&access);

  tlm::tlm_phase phase = tlm::BEGIN_REQ;
  sc_core::sc_time time = from_ps(access.sent - now);
  const tlm::tlm_sync_enum answer = socket->nb_transport_fw(access, phase, time);
  const Picoseconds when = now + to_ps(time);
  if (answer == tlm::TLM_ACCEPTED) return;
  if (!at_target(access) || access.answered) {
    misuse("answers BEGIN_REQ with more than TLM_ACCEPTED after it has sent BEGIN_RESP");
  } else if (answer == tlm::TLM_COMPLETED) {
    end_request(access, now);
    respond(access, when);
  } else if (answer == tlm::TLM_UPDATED && phase == tlm::END_REQ) {
    end_request(access, when);
  } else if (answer == tlm::TLM_UPDATED && phase == tlm::BEGIN_RESP) {
    end_request(access, when);
    access.answered = true;
    agenda_.at<&WindowPort::end_response>(when, this, &access);
  } else {
    misuse("answers BEGIN_REQ with TLM_UPDATED and neither END_REQ nor BEGIN_RESP");
  }
}

// Sends what waits once the request phase is over.
void WindowPort::end_request(WindowAccess& access, Picoseconds when) {
  if (!access.requesting) return;
  access.requesting = false;
  if (when > now_ps())
    agenda_.at<&WindowPort::next_request>(when, this, &access);
  else
    busy_ = false;
}

void WindowPort::next_request(WindowAccess*) {
  busy_ = false;
  send_next();
}

bool WindowPort::at_target(const WindowAccess& access) const {
  return std::find(at_target_.begin(), at_target_.end(), &access) != at_target_.end();
}

void WindowPort::respond(WindowAccess& access, Picoseconds when) {
  access.ended = std::max(when, access.sent);
  const Picoseconds now = now_ps();
  target_meter_.leave(now, access.asked);
  at_target_.erase(std::find(at_target_.begin(), at_target_.end(), &access));
  judge(access, access.whole == nullptr ? access.pieces : access.whole->pieces);
  if (access.whole == nullptr)
    listener_.answered(access);
  else
    piece_answered(access, *access.whole);
}

void WindowPort::judge(tlm::tlm_generic_payload& payload, const AccessPieces& piece) {
  if (payload.get_response_status() == tlm::TLM_INCOMPLETE_RESPONSE) {
    if (!window_.no_status_is_ok) {
      warn_once(warned_no_status_, "sets no response status: an error to whoever asked; if it means that all went "
                                   "well, set Window::no_status_is_ok");
      return;
    }
    payload.set_response_status(tlm::TLM_OK_RESPONSE);
  }
  // Some say in this way how much they did (IEEE 1666-2011, 14.13, forbids it).
  const bool short_of_data = payload.get_data_length() < piece.length();
  if (short_of_data && payload.is_response_ok()) payload.set_response_status(tlm::TLM_BURST_ERROR_RESPONSE);
  if (payload.is_response_ok() || (!window_.cached && !short_of_data)) return;
  std::ostringstream text;
  text << "does not do a " << (piece.is_write() ? "write" : "read") << " of " << piece.length() << " bytes at 0x"
       << std::hex << piece.address() << std::dec << ", its address (" << payload.get_response_string()
       << "): an error to whoever asked; if it takes fewer bytes at a time, set Window::max_burst";
  warn_once(warned_refusal_, text.str());
}

void WindowPort::warn_once(bool& warned, const std::string& what) const {
  if (warned) return;
  warned = true;
  SC_REPORT_WARNING("/earshot/bus/target", (std::string(name()) + ": the target of window '" + window_.name + "' " +
                                            what + "; told once")
                                               .c_str());
}

// BEGIN_RESP came on the return path: END_RESP has to be sent.
void WindowPort::end_response(WindowAccess* access) {
  tlm::tlm_phase phase = tlm::END_RESP;
  sc_core::sc_time time;
  socket->nb_transport_fw(*access, phase, time);
  respond(*access, now_ps());
}

tlm::tlm_sync_enum WindowPort::nb_transport_bw(tlm::tlm_generic_payload& payload, tlm::tlm_phase& phase,
                                               sc_core::sc_time& time) {
  if (phase > tlm::END_RESP) return tlm::TLM_ACCEPTED;  // an ignorable phase of somebody's own (15.2.5)
  struct Path {  // also if a report throws
    bool& taken;
    ~Path() { taken = false; }
  } path{listener_.on_backward_path};
  path.taken = true;
  return target_says(payload, phase, now_ps() + to_ps(time));
}

tlm::tlm_sync_enum WindowPort::target_says(tlm::tlm_generic_payload& payload, const tlm::tlm_phase& phase,
                                           Picoseconds when) {
  if (phase == tlm::END_REQ) {
    WindowAccess& access = known(payload, "END_REQ");
    if (!access.requesting) misuse("sends END_REQ twice for one access");
    end_request(access, when);
    send_next();
    return tlm::TLM_ACCEPTED;
  }
  if (phase == tlm::BEGIN_RESP) {
    WindowAccess& access = known(payload, "BEGIN_RESP");
    if (access.answered) {
      misuse("sends BEGIN_RESP twice for one access");
      return tlm::TLM_ACCEPTED;
    }
    end_request(access, when);  // BEGIN_RESP implies END_REQ
    respond(access, when);
    send_next();
    return tlm::TLM_COMPLETED;
  }
  std::ostringstream text;
  text << "sends phase " << phase << "; expected END_REQ or BEGIN_RESP";
  misuse(text.str());
  return tlm::TLM_ACCEPTED;
}

WindowAccess& WindowPort::known(tlm::tlm_generic_payload& payload, const char* phase) {
  for (WindowAccess* access : at_target_)
    if (access == &payload) return *access;
  misuse(std::string("sends ") + phase + " for an access it does not have");
  throw std::logic_error("unreachable unless the report's action was changed");
}

void WindowPort::misuse(const std::string& what) const {
  SC_REPORT_ERROR("/earshot/bus/protocol", (std::string(name()) + ": the target of window '" + window_.name + "' " +
                                            what + " (IEEE 1666-2011, 15.2, base protocol)")
                                               .c_str());
}

void WindowPort::invalidate_direct_mem_ptr(sc_dt::uint64 first, sc_dt::uint64 last) {
  const std::uint64_t size_less_one = window_.last() - window_.base;
  if (last < window_.target_base || first > window_.target_base + size_less_one) return;
  first = std::max<std::uint64_t>(first, window_.target_base) - window_.target_base;
  last = std::min<std::uint64_t>(last - window_.target_base, size_less_one);
  listener_.direct_memory_ended(window_.base + first, window_.base + last);
}

std::string WindowPort::waiting() const {
  std::ostringstream text;
  const auto one = [&](const WindowAccess& access, const char* where) {
    text << "window " << window_.name << ": " << (access.is_write() ? "write" : "read") << " of "
         << access.get_data_length() << " bytes at 0x" << std::hex << access.get_address() << std::dec
         << ' ' << where << " since " << from_ps(access.asked) << '\n';
  };
  for (const WindowAccess* access : at_target_)
    one(*access, access->requesting ? "waits for the target to end its request phase (END_REQ)"
                                    : "waits for the target's response (BEGIN_RESP)");
  for (const WindowAccess* access : queue_) one(*access, "queues for the target's request phase");
  return text.str();
}

}  // namespace earshot
