#include "probe/cage.h"

#include <fcntl.h>
#include <gtest/gtest.h>
#include <signal.h>
#include <sys/mman.h>
#include <sys/socket.h>
#include <sys/wait.h>
#include <unistd.h>

#include <cerrno>
#include <cstdlib>
#include <functional>
#include <vector>

#include "base/limits.h"

namespace bentlight::probe {
namespace {

constexpr int refused = 77;

/// Exit code of a process that enters the cage and then runs `body`; -signal when one killed it.
int in_a_cage(const std::function<int()>& body) {
  const pid_t child = ::fork();
  if (child == 0) ::_exit(enter_cage() ? body() : 99);
  int status = 0;
  EXPECT_EQ(::waitpid(child, &status, 0), child);
  return WIFSIGNALED(status) ? -WTERMSIG(status) : WEXITSTATUS(status);
}

int refused_if(bool failed) {
  return failed && errno == EPERM ? refused : 0;
}

TEST(Cage, RefusesToOpenAnything) {
  EXPECT_EQ(in_a_cage([] { return refused_if(::open("/dev/null", O_RDONLY) < 0); }), refused);
  EXPECT_EQ(in_a_cage([] { return refused_if(::open("/tmp/new", O_CREAT | O_WRONLY, 0600) < 0); }), refused);
}

TEST(Cage, RefusesTheNetworkProgramsAndOtherProcesses) {
  EXPECT_EQ(in_a_cage([] { return refused_if(::socket(AF_INET, SOCK_STREAM, 0) < 0); }), refused);
  EXPECT_EQ(in_a_cage([] { return refused_if(::socket(AF_UNIX, SOCK_DGRAM, 0) < 0); }), refused);
  EXPECT_EQ(in_a_cage([] {
              char* const arguments[] = {nullptr};
              return refused_if(::execve("/bin/true", arguments, arguments) < 0);
            }),
            refused);
  EXPECT_EQ(in_a_cage([] { return refused_if(::fork() < 0); }), refused);
  EXPECT_EQ(in_a_cage([] { return refused_if(::kill(::getppid(), 0) < 0); }), refused);
  EXPECT_EQ(in_a_cage([] { return refused_if(::unlink("/tmp/absent") < 0); }), refused);
}

TEST(Cage, RefusesMemoryThatCanBeRun) {
  const auto map = [](int protection) {
    return ::mmap(nullptr, 4096, protection, MAP_PRIVATE | MAP_ANONYMOUS, -1, 0);
  };
  EXPECT_EQ(in_a_cage([&] { return refused_if(map(PROT_READ | PROT_WRITE | PROT_EXEC) == MAP_FAILED); }),
            refused);
  EXPECT_EQ(in_a_cage([&] { return map(PROT_READ | PROT_WRITE) == MAP_FAILED ? 1 : 0; }), 0);
}

TEST(Cage, LeavesThePipeAndTheFileButNoOtherDescriptor) {
  const int other = ::fcntl(0, F_DUPFD, 50);
  ASSERT_GE(other, 50);

  EXPECT_EQ(in_a_cage([&] { return ::close(other) == 0 ? 0 : refused; }), refused);  // closed already
  EXPECT_EQ(in_a_cage([] { return ::write(1, "", 0) == 0 ? 0 : 1; }), 0);

  ::close(other);
}

TEST(Cage, AllowsAProcessToAbort) {
  EXPECT_EQ(in_a_cage([] {
              std::abort();
              return 0;
            }),
            -SIGABRT);
}

#if !defined(__SANITIZE_ADDRESS__) && !defined(__SANITIZE_THREAD__)
TEST(Cage, BoundsMemory) {
  EXPECT_EQ(in_a_cage([] { return std::malloc(limits::probe_memory_bytes) == nullptr ? refused : 0; }),
            refused);
  EXPECT_EQ(in_a_cage([] { return std::malloc(limits::probe_memory_bytes / 2) == nullptr ? refused : 0; }),
            0);
}
#endif

}  // namespace
}  // namespace bentlight::probe
