// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/bus/request_queue.h"

#include <algorithm>

namespace earshot {

void RequestQueue::push(const Request& request) {
  const auto port = static_cast<std::size_t>(request.transaction->requester);
  if (port >= ports_.size()) ports_.resize(port + 1);
  ports_[port].push_back(request);
  if (request.transaction->follows_up) follow_ups_.push_back(request.transaction);
  asking_ |= std::uint64_t{1} << port;
  ++size_;
}

bool RequestQueue::held_up(const Request& request) const {
  const BusTransaction& transaction = *request.transaction;
  if (transaction.io != nullptr) return (uncached_ >> transaction.requester & 1) != 0;
  for (const BusTransaction* const other : follow_ups_)
    if (other->line == transaction.line && other != &transaction) return true;
  return locked(transaction.line);
}

std::size_t RequestQueue::oldest(std::size_t port, Picoseconds now) const {
  const std::vector<Request>& requests = ports_[port];
  std::size_t i = 0;
  while (i < requests.size() && (requests[i].ready > now || held_up(requests[i]))) ++i;
  return i;
}

const std::vector<Contender>& RequestQueue::contenders(Picoseconds now) {
  contenders_.clear();
  places_.clear();
  for (std::uint64_t rest = asking_; rest != 0; rest &= rest - 1) {
    const int port = __builtin_ctzll(rest);
    const std::size_t place = oldest(static_cast<std::size_t>(port), now);
    if (place == ports_[static_cast<std::size_t>(port)].size()) continue;
    contenders_.push_back({port, ports_[static_cast<std::size_t>(port)][place].since});
    places_.push_back(place);
  }
  return contenders_;
}

RequestQueue::Request RequestQueue::take(std::size_t index) {
  const auto port = static_cast<std::size_t>(contenders_[index].port);
  std::vector<Request>& requests = ports_[port];
  const auto place = requests.begin() + static_cast<std::ptrdiff_t>(places_[index]);
  const Request request = *place;
  requests.erase(place);
  if (request.transaction->follows_up)
    follow_ups_.erase(std::find(follow_ups_.begin(), follow_ups_.end(), request.transaction));
  if (requests.empty()) asking_ &= ~(std::uint64_t{1} << port);
  --size_;
  return request;
}

Picoseconds RequestQueue::next_ready(Picoseconds now) const {
  Picoseconds next = never;
  for (std::uint64_t rest = asking_; rest != 0; rest &= rest - 1)
    for (const Request& request : ports_[static_cast<std::size_t>(__builtin_ctzll(rest))])
      if (request.ready > now && !held_up(request)) next = std::min(next, request.ready);
  return next;
}

void RequestQueue::lock(const BusTransaction& transaction) {
  if (transaction.io == nullptr)
    locked_.push_back(transaction.line);
  else
    uncached_ |= std::uint64_t{1} << transaction.requester;
}

void RequestQueue::unlock(std::uint64_t line) {
  const auto found = std::find(locked_.begin(), locked_.end(), line);
  *found = locked_.back();
  locked_.pop_back();
}

bool RequestQueue::locked(std::uint64_t line) const {
  return std::find(locked_.begin(), locked_.end(), line) != locked_.end();
}

}  // namespace earshot
