// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
//
// System calls that may wait for the world outside: the others run meanwhile. When such a call returns is
// beyond the seed, so a call that can be answered at once is made without giving up the turn.
#include <errno.h>
#include <poll.h>
#include <signal.h>
#include <sys/epoll.h>
#include <sys/select.h>
#include <sys/socket.h>
#include <sys/uio.h>
#include <sys/wait.h>
#include <unistd.h>

#include "clocks.h"
#include "emit.h"
#include "scheduler.h"

EARSHOT_REAL(read)
EARSHOT_REAL(readv)
EARSHOT_REAL(write)
EARSHOT_REAL(writev)
EARSHOT_REAL(recv)
EARSHOT_REAL(recvfrom)
EARSHOT_REAL(recvmsg)
EARSHOT_REAL(send)
EARSHOT_REAL(sendto)
EARSHOT_REAL(sendmsg)
EARSHOT_REAL(accept)
EARSHOT_REAL(accept4)
EARSHOT_REAL(connect)
EARSHOT_REAL(poll)
EARSHOT_REAL(ppoll)
EARSHOT_REAL(select)
EARSHOT_REAL(pselect)
EARSHOT_REAL(epoll_wait)
EARSHOT_REAL(epoll_pwait)
EARSHOT_REAL(waitpid)
EARSHOT_REAL(pause)
EARSHOT_REAL(sigwait)
EARSHOT_REAL(sigwaitinfo)
EARSHOT_REAL(sigtimedwait)
EARSHOT_REAL(sigsuspend)

using namespace earshot::recorder;  // definitions below stand for the C library's

namespace {

// Larger writes to a pipe may wait although there is room for some of it.
constexpr size_t surely_written = 4096;

bool is_ready(int descriptor, short events) {
  pollfd ask{descriptor, events, 0};
  return real::poll(&ask, nfds_t{1}, 0) != 0;  // an error will be the call's own
}

// The call, with the turn given up meanwhile. The calls are cancellation points, and may unwind from here.
template <typename Call>
auto outside(Thread* t, const char* name, Call call) {
  settle(t);
  go_outside(t, name);
  const auto result = call();
  const int error = errno;
  come_back(t);
  leaving(t);
  errno = error;
  return result;
}

template <typename Call>
auto outside_unless_ready(const char* name, int descriptor, short events, Call call) {
  const bool at_once = !run.one_at_a_time || self == nullptr || self->inside || is_ready(descriptor, events);
  Thread* t = at_once ? nullptr : modelling();
  return t == nullptr ? call() : outside(t, name, call);
}

template <typename Call>
auto outside_always(const char* name, Call call) {
  Thread* t = modelling();
  return t == nullptr ? call() : outside(t, name, call);
}

// Whether the call was only a way to sleep, and has been slept.
bool was_a_sleep(bool nothing_to_wait_for, const timespec* span) {
  if (!nothing_to_wait_for || span == nullptr || !is_valid(*span) || !run.one_at_a_time) return false;
  return nanosleep(span, nullptr) == 0;
}

timespec milliseconds(int n) {
  return {n / 1000, n % 1000 * 1'000'000L};
}

}  // namespace

EARSHOT_TAKES(ssize_t, read, int fd, void* to, size_t size) {
  return outside_unless_ready("read", fd, POLLIN, [=] { return real::read(fd, to, size); });
}
EARSHOT_TAKES(ssize_t, readv, int fd, const iovec* to, int n) {
  return outside_unless_ready("readv", fd, POLLIN, [=] { return real::readv(fd, to, n); });
}
EARSHOT_TAKES(ssize_t, write, int fd, const void* from, size_t size) {
  const auto call = [=] { return real::write(fd, from, size); };
  if (size > surely_written) return outside_always("write", call);
  return outside_unless_ready("write", fd, POLLOUT, call);
}
EARSHOT_TAKES(ssize_t, writev, int fd, const iovec* from, int n) {
  return outside_unless_ready("writev", fd, POLLOUT, [=] { return real::writev(fd, from, n); });
}
EARSHOT_TAKES(ssize_t, recv, int fd, void* to, size_t size, int flags) {
  return outside_unless_ready("recv", fd, POLLIN, [=] { return real::recv(fd, to, size, flags); });
}
EARSHOT_TAKES(ssize_t, recvfrom, int fd, void* to, size_t size, int flags, sockaddr* who, socklen_t* length) {
  return outside_unless_ready("recvfrom", fd, POLLIN,
                              [=] { return real::recvfrom(fd, to, size, flags, who, length); });
}
EARSHOT_TAKES(ssize_t, recvmsg, int fd, msghdr* message, int flags) {
  return outside_unless_ready("recvmsg", fd, POLLIN, [=] { return real::recvmsg(fd, message, flags); });
}
EARSHOT_TAKES(ssize_t, send, int fd, const void* from, size_t size, int flags) {
  return outside_unless_ready("send", fd, POLLOUT, [=] { return real::send(fd, from, size, flags); });
}
EARSHOT_TAKES(ssize_t, sendto, int fd, const void* from, size_t size, int flags, const sockaddr* who,
              socklen_t length) {
  return outside_unless_ready("sendto", fd, POLLOUT,
                              [=] { return real::sendto(fd, from, size, flags, who, length); });
}
EARSHOT_TAKES(ssize_t, sendmsg, int fd, const msghdr* message, int flags) {
  return outside_unless_ready("sendmsg", fd, POLLOUT, [=] { return real::sendmsg(fd, message, flags); });
}
EARSHOT_TAKES(int, accept, int fd, sockaddr* who, socklen_t* length) {
  return outside_unless_ready("accept", fd, POLLIN, [=] { return real::accept(fd, who, length); });
}
EARSHOT_TAKES(int, accept4, int fd, sockaddr* who, socklen_t* length, int flags) {
  return outside_unless_ready("accept4", fd, POLLIN, [=] { return real::accept4(fd, who, length, flags); });
}
EARSHOT_TAKES(int, connect, int fd, const sockaddr* who, socklen_t length) {
  return outside_always("connect", [=] { return real::connect(fd, who, length); });
}

EARSHOT_TAKES(int, poll, pollfd* set, nfds_t n, int timeout) {
  const timespec span = milliseconds(timeout > 0 ? timeout : 0);
  if (was_a_sleep(n == 0, timeout >= 0 ? &span : nullptr)) return 0;
  if (timeout == 0) return real::poll(set, n, timeout);
  if (run.one_at_a_time && self != nullptr) {
    const int ready = real::poll(set, n, 0);
    if (ready != 0) return ready;
  }
  return outside_always("poll", [=] { return real::poll(set, n, timeout); });
}
EARSHOT_TAKES(int, ppoll, pollfd* set, nfds_t n, const timespec* timeout, const sigset_t* mask) {
  if (was_a_sleep(n == 0 && mask == nullptr, timeout)) return 0;
  return outside_always("ppoll", [=] { return real::ppoll(set, n, timeout, mask); });
}
EARSHOT_TAKES(int, select, int n, fd_set* in, fd_set* out, fd_set* other, timeval* timeout) {
  timespec span{};
  if (timeout != nullptr) span = {timeout->tv_sec, timeout->tv_usec * 1000};
  if (was_a_sleep(n == 0, timeout != nullptr ? &span : nullptr)) return 0;
  return outside_always("select", [=] { return real::select(n, in, out, other, timeout); });
}
EARSHOT_TAKES(int, pselect, int n, fd_set* in, fd_set* out, fd_set* other, const timespec* timeout,
              const sigset_t* mask) {
  if (was_a_sleep(n == 0 && mask == nullptr, timeout)) return 0;
  return outside_always("pselect", [=] { return real::pselect(n, in, out, other, timeout, mask); });
}
EARSHOT_TAKES(int, epoll_wait, int fd, epoll_event* events, int n, int timeout) {
  return outside_unless_ready("epoll_wait", fd, POLLIN,
                              [=] { return real::epoll_wait(fd, events, n, timeout); });
}
EARSHOT_TAKES(int, epoll_pwait, int fd, epoll_event* events, int n, int timeout, const sigset_t* mask) {
  return outside_unless_ready("epoll_pwait", fd, POLLIN,
                              [=] { return real::epoll_pwait(fd, events, n, timeout, mask); });
}

EARSHOT_TAKES(pid_t, waitpid, pid_t process, int* status, int options) {
  const auto call = [=] { return real::waitpid(process, status, options); };
  return (options & WNOHANG) != 0 ? call() : outside_always("waitpid", call);
}
EARSHOT_TAKES(int, pause) {
  return outside_always("pause", [] { return real::pause(); });
}
EARSHOT_TAKES(int, sigwait, const sigset_t* set, int* signal) {
  return outside_always("sigwait", [=] { return real::sigwait(set, signal); });
}
EARSHOT_TAKES(int, sigwaitinfo, const sigset_t* set, siginfo_t* info) {
  return outside_always("sigwaitinfo", [=] { return real::sigwaitinfo(set, info); });
}
EARSHOT_TAKES(int, sigtimedwait, const sigset_t* set, siginfo_t* info, const timespec* timeout) {
  return outside_always("sigtimedwait", [=] { return real::sigtimedwait(set, info, timeout); });
}
EARSHOT_TAKES(int, sigsuspend, const sigset_t* mask) {
  return outside_always("sigsuspend", [=] { return real::sigsuspend(mask); });
}

EARSHOT_PART(outside)
