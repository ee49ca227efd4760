// Copyright the Earshot authors.
// SPDX-License-Identifier: Apache-2.0
#include "earshot/traffic/recorder/recorded_process.h"

#include <fcntl.h>
#include <signal.h>
#include <sys/mman.h>
#include <sys/personality.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cerrno>
#include <cstdlib>
#include <cstring>
#include <new>

#include "earshot/traffic/recorder/record.h"

namespace earshot {

namespace {

[[noreturn]] void fail(const std::string& what, int error) {
  throw RecordError(what + ": " + std::strerror(error));
}

bool is_program(const std::string& path) {
  struct stat status {};
  return stat(path.c_str(), &status) == 0 && S_ISREG(status.st_mode) && access(path.c_str(), X_OK) == 0;
}

std::string find_program(const std::string& name) {
  if (name.find('/') != std::string::npos) {
    if (is_program(name)) return name;
    if (access(name.c_str(), F_OK) != 0) throw RecordError(name + ": there is no such program");
    throw RecordError(name + ": is not a program that may be run");
  }
  const char* path = std::getenv("PATH");
  std::string folders = path != nullptr ? path : "/usr/bin:/bin";
  for (std::size_t from = 0; from <= folders.size();) {
    const std::size_t to = std::min(folders.find(':', from), folders.size());
    const std::string folder = to == from ? "." : folders.substr(from, to - from);
    if (is_program(folder + "/" + name)) return folder + "/" + name;
    from = to + 1;
  }
  throw RecordError(name + ": there is no such program in PATH; for one in this directory say ./" + name);
}

// The kernel puts the path, the environment and the arguments above the stack, and pointers to the latter two
// below those: the padding brings the bytes of the first and the number of the second to fixed multiples.
std::vector<std::string> padded_environment(const std::string& path, const std::vector<std::string>& program,
                                            int descriptor) {
  constexpr std::size_t byte_multiple = 16384;
  constexpr std::size_t count_multiple = 256;
  const std::string padding = "EARSHOT_PADDING=";
  std::vector<std::string> environment;
  for (char** variable = environ; *variable != nullptr; ++variable) {
    const std::string text = *variable;
    if (text.compare(0, padding.size(), padding) != 0) environment.push_back(text);
  }
  environment.push_back(std::string(recorder::ring_variable) + "=" + std::to_string(descriptor));
  do {
    environment.push_back(padding);
  } while ((environment.size() + program.size()) % count_multiple != 0);
  std::size_t bytes = path.size() + 1;
  for (const std::string& text : environment) bytes += text.size() + 1;
  for (const std::string& text : program) bytes += text.size() + 1;
  environment.back().append((byte_multiple - bytes % byte_multiple) % byte_multiple, '-');
  return environment;
}

std::vector<char*> pointers_to(std::vector<std::string>& texts) {
  std::vector<char*> pointers;
  for (std::string& text : texts) pointers.push_back(text.data());
  pointers.push_back(nullptr);
  return pointers;
}

// What the new process says of itself before it becomes the program, and afterwards if it could not.
struct Start {
  int error = 0;
  bool addresses_fixed = false;
};

[[noreturn]] void become(const char* path, char** arguments, char** environment, int keep, int tell) {
  Start start;
  const int persona = personality(0xffffffff);
  start.addresses_fixed =
      persona != -1 && personality(static_cast<unsigned long>(persona | ADDR_NO_RANDOMIZE)) != -1;
  fcntl(keep, F_SETFD, 0);
  [[maybe_unused]] ssize_t written = write(tell, &start, sizeof start);
  execve(path, arguments, environment);
  start.error = errno;
  written = write(tell, &start, sizeof start);
  _exit(127);
}

}  // namespace

RecordedProcess::RecordedProcess() {
  descriptor_ = memfd_create("earshot-record", MFD_CLOEXEC);
  if (descriptor_ < 0) fail("cannot make shared memory", errno);
  if (ftruncate(descriptor_, static_cast<off_t>(recorder::ring_bytes)) != 0) {
    const int error = errno;
    close(descriptor_);
    fail("cannot make shared memory", error);
  }
  void* mapped = mmap(nullptr, recorder::ring_bytes, PROT_READ | PROT_WRITE, MAP_SHARED, descriptor_, 0);
  if (mapped == MAP_FAILED) {
    const int error = errno;
    close(descriptor_);
    fail("cannot map shared memory", error);
  }
  ring_ = new (mapped) recorder::RingHeader{};
  ring_->magic = recorder::ring_magic;
  ring_->version = recorder::ring_version;
  ring_->recorder_process = getpid();
}

RecordedProcess::~RecordedProcess() {
  if (process_ > 0 && !ended_) {
    kill(process_, SIGKILL);
    waitpid(process_, &status_, 0);
  }
  munmap(ring_, recorder::ring_bytes);
  close(descriptor_);
}

void RecordedProcess::start(const std::vector<std::string>& program) {
  if (program.empty()) throw RecordError("no program was named");
  const std::string path = find_program(program[0]);
  std::vector<std::string> arguments = program;
  std::vector<std::string> environment = padded_environment(path, program, descriptor_);
  const std::vector<char*> argument_pointers = pointers_to(arguments);
  const std::vector<char*> environment_pointers = pointers_to(environment);

  int tell[2];
  if (pipe2(tell, O_CLOEXEC) != 0) fail("cannot make a pipe", errno);
  process_ = fork();
  if (process_ == 0) {
    become(path.c_str(), const_cast<char**>(argument_pointers.data()),
           const_cast<char**>(environment_pointers.data()), descriptor_, tell[1]);
  }
  const int fork_error = errno;
  close(tell[1]);
  Start start;
  while (process_ > 0 && read(tell[0], &start, sizeof start) == static_cast<ssize_t>(sizeof start)) {
  }
  close(tell[0]);
  if (process_ < 0) fail("cannot start a process", fork_error);
  addresses_fixed_ = start.addresses_fixed;
  if (start.error != 0) fail(path + ": cannot be run", start.error);
}

bool RecordedProcess::has_ended() {
  if (!ended_) ended_ = waitpid(process_, &status_, WNOHANG) == process_;
  return ended_;
}

}  // namespace earshot
