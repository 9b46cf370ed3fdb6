#include "archive/child.h"

#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <spawn.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <cerrno>
#include <cstdlib>
#include <system_error>
#include <utility>

#include "base/limits.h"

namespace bentlight::archive {

namespace {

using Clock = std::chrono::steady_clock;

/// Sources of dup2 in the child stay above the numbers that they become.
constexpr int lowest_source = 16;

class Descriptor {
 public:
  explicit Descriptor(int value = -1) : value_(value) {}
  Descriptor(Descriptor&& other) noexcept : value_(std::exchange(other.value_, -1)) {}
  Descriptor& operator=(Descriptor&& other) noexcept {
    std::swap(value_, other.value_);
    return *this;
  }
  ~Descriptor() { reset(); }
  int value() const { return value_; }
  void reset() {
    if (value_ >= 0) ::close(value_);
    value_ = -1;
  }

 private:
  int value_;
};

Descriptor raised(int descriptor) {
  return Descriptor(::fcntl(descriptor, F_DUPFD_CLOEXEC, lowest_source));
}

struct Pipe {
  Descriptor reading, writing;
};

Expected<Pipe> make_pipe() {
  std::array<int, 2> ends{};
  if (::pipe2(ends.data(), O_CLOEXEC) != 0) return system_failure(errno, "making a pipe", "probe");
  Descriptor reading(ends[0]);
  const Descriptor low_writing(ends[1]);
  Pipe pipe{std::move(reading), raised(low_writing.value())};
  if (pipe.writing.value() < 0) return system_failure(errno, "making a pipe", "probe");
  return pipe;
}

/// What posix_spawn does in the child before the program starts.
class SpawnActions {
 public:
  SpawnActions() { ::posix_spawn_file_actions_init(&actions_); }
  ~SpawnActions() { ::posix_spawn_file_actions_destroy(&actions_); }
  SpawnActions(const SpawnActions&) = delete;
  SpawnActions& operator=(const SpawnActions&) = delete;

  void null_device(int descriptor, int flags) {
    ::posix_spawn_file_actions_addopen(&actions_, descriptor, "/dev/null", flags, 0);
  }
  void move(int from, int to) { ::posix_spawn_file_actions_adddup2(&actions_, from, to); }
  void close_from(int lowest) { ::posix_spawn_file_actions_addclosefrom_np(&actions_, lowest); }
  const posix_spawn_file_actions_t* get() const { return &actions_; }

 private:
  posix_spawn_file_actions_t actions_;
};

/// A thread of the service may have signals blocked or ignored; the child begins with none.
class SpawnAttributes {
 public:
  SpawnAttributes() {
    ::posix_spawnattr_init(&attributes_);
    sigset_t none, all;
    ::sigemptyset(&none);
    ::sigfillset(&all);
    ::posix_spawnattr_setsigmask(&attributes_, &none);
    ::posix_spawnattr_setsigdefault(&attributes_, &all);
    ::posix_spawnattr_setflags(&attributes_, POSIX_SPAWN_SETSIGMASK | POSIX_SPAWN_SETSIGDEF);
  }
  ~SpawnAttributes() { ::posix_spawnattr_destroy(&attributes_); }
  SpawnAttributes(const SpawnAttributes&) = delete;
  SpawnAttributes& operator=(const SpawnAttributes&) = delete;
  const posix_spawnattr_t* get() const { return &attributes_; }

 private:
  posix_spawnattr_t attributes_;
};

Expected<pid_t> spawn(const ChildTask& task, int output) {
  const Descriptor file = raised(task.file_descriptor);
  if (file.value() < 0) return system_failure(errno, "handing over a file", task.program.string());

  SpawnActions actions;
  actions.null_device(0, O_RDONLY);
  actions.move(output, 1);
  actions.null_device(2, O_WRONLY);
  actions.move(file.value(), task.file_descriptor_there);
  actions.close_from(task.file_descriptor_there + 1);
  const SpawnAttributes attributes;

  std::string program = task.program.string();
  std::vector<std::string> words = task.arguments;
  std::vector<char*> arguments{program.data()};
  for (std::string& word : words) arguments.push_back(word.data());
  arguments.push_back(nullptr);
  // Where the site keeps its libraries is the one thing that a child must know.
  const char* libraries = std::getenv("LD_LIBRARY_PATH");
  std::string library_path = libraries == nullptr ? "" : std::string("LD_LIBRARY_PATH=") + libraries;
  std::array<char*, 2> environment{library_path.empty() ? nullptr : library_path.data(), nullptr};

  pid_t child = 0;
  const int error_number = ::posix_spawn(&child, program.c_str(), actions.get(), attributes.get(),
                                         arguments.data(), environment.data());
  if (error_number != 0) {
    // Not by code_of_errno: a missing program is a fault of the installation, not a missing wavefront file.
    return failure(ErrorCode::io_error, "starting it: " + std::generic_category().message(error_number),
                   program);
  }
  return child;
}

/// Reads until the child closes its end, or a limit is reached.
void collect(int reading, const ChildTask& task, ChildEnd& end) {
  const auto deadline = Clock::now() + task.time_limit;
  std::vector<std::byte> piece(64 * limits::kibi);
  while (true) {
    const auto left = std::chrono::ceil<std::chrono::milliseconds>(deadline - Clock::now());
    pollfd waiting{.fd = reading, .events = POLLIN, .revents = 0};
    const int ready = left.count() > 0 ? ::poll(&waiting, 1, static_cast<int>(left.count())) : 0;
    if (ready < 0 && errno == EINTR) continue;
    if (ready <= 0) {
      end.out_of_time = true;
      return;
    }
    const ssize_t got = ::read(reading, piece.data(), piece.size());
    if (got < 0 && errno == EINTR) continue;
    if (got <= 0) return;
    if (end.output.size() + static_cast<std::size_t>(got) > task.output_limit_bytes) {
      end.out_of_output = true;
      return;
    }
    end.output.insert(end.output.end(), piece.begin(), piece.begin() + got);
  }
}

}  // namespace

Expected<ChildEnd> run_child(const ChildTask& task) {
  auto pipe = make_pipe();
  if (!pipe) return failure(pipe);
  const auto child = spawn(task, pipe->writing.value());
  if (!child) return failure(child);
  pipe->writing.reset();

  ChildEnd end;
  collect(pipe->reading.value(), task, end);
  // A child that has closed its output has nothing more to say; one that went on running would hold us up.
  ::kill(*child, SIGKILL);
  int status = 0;
  while (::waitpid(*child, &status, 0) < 0 && errno == EINTR) {
  }
  if (WIFSIGNALED(status)) end.signal = WTERMSIG(status);
  if (WIFEXITED(status)) end.exit_code = WEXITSTATUS(status);
  return end;
}

}  // namespace bentlight::archive
