#include "probe/cage.h"

#include <fcntl.h>
#include <seccomp.h>
#include <signal.h>
#include <sys/mman.h>
#include <sys/prctl.h>
#include <sys/resource.h>
#include <unistd.h>

#include <array>
#include <cerrno>
#include <memory>
#include <type_traits>

#include "archive/probe_protocol.h"
#include "base/limits.h"

namespace bentlight::probe {

namespace {

// The sanitizers reserve terabytes of addresses, and try with a pipe whether an address can be read.
#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
constexpr bool is_sanitized = true;
#else
constexpr bool is_sanitized = false;
#endif

Expected<void> limited(__rlimit_resource resource, rlim_t limit) {
  const rlimit both{limit, limit};
  if (::setrlimit(resource, &both) != 0) return system_failure(errno, "limiting the probe", "cage");
  return {};
}

Expected<void> limit_resources() {
  struct Limit {
    __rlimit_resource resource;
    rlim_t limit;
  };
  const auto seconds = static_cast<rlim_t>(limits::probe_seconds.count());
  for (const auto& [resource, limit] :
       {Limit{RLIMIT_CPU, seconds}, Limit{RLIMIT_FSIZE, 0}, Limit{RLIMIT_CORE, 0},
        Limit{RLIMIT_NOFILE, is_sanitized ? 64 : archive::probe_file_descriptor + 1},
        Limit{RLIMIT_NPROC, 0}}) {
    if (auto set = limited(resource, limit); !set) return set;
  }
  if (is_sanitized) return {};
  return limited(RLIMIT_AS, limits::probe_memory_bytes);
}

struct Release {
  void operator()(void* context) const { ::seccomp_release(context); }
};

// What the HDF5 library, the C library's heap and the end of a process call. Reading and writing go through
// descriptors that are open already.
constexpr std::array allowed_calls = {
    SCMP_SYS(pread64),
    SCMP_SYS(read),
    SCMP_SYS(write),
    SCMP_SYS(close),
    SCMP_SYS(fstat),
    SCMP_SYS(lseek),
    SCMP_SYS(brk),
    SCMP_SYS(munmap),
    SCMP_SYS(mremap),
    SCMP_SYS(madvise),
    SCMP_SYS(futex),
    SCMP_SYS(clock_gettime),
    SCMP_SYS(gettimeofday),
    SCMP_SYS(getrusage),
    SCMP_SYS(getpid),
    SCMP_SYS(gettid),
    SCMP_SYS(getrandom),
    SCMP_SYS(sched_yield),
    SCMP_SYS(rt_sigreturn),
    SCMP_SYS(rt_sigaction),
    SCMP_SYS(rt_sigprocmask),
    SCMP_SYS(sigaltstack),
    SCMP_SYS(restart_syscall),
    SCMP_SYS(exit),
    SCMP_SYS(exit_group),
};

Expected<void> filter_calls() {
  const std::unique_ptr<std::remove_pointer_t<scmp_filter_ctx>, Release> filter(
      ::seccomp_init(SCMP_ACT_ERRNO(EPERM)));
  if (!filter) return failure(ErrorCode::internal, "the system call filter cannot be made", "cage");
  int failed = 0;
  for (const int call : allowed_calls) failed |= ::seccomp_rule_add(filter.get(), SCMP_ACT_ALLOW, call, 0);
  if (is_sanitized) failed |= ::seccomp_rule_add(filter.get(), SCMP_ACT_ALLOW, SCMP_SYS(pipe2), 0);
  if (is_sanitized) failed |= ::seccomp_rule_add(filter.get(), SCMP_ACT_ALLOW, SCMP_SYS(pipe), 0);
  // Memory, but none that can be run.
  for (const int call : {SCMP_SYS(mmap), SCMP_SYS(mprotect)}) {
    failed |=
        ::seccomp_rule_add(filter.get(), SCMP_ACT_ALLOW, call, 1, SCMP_A2(SCMP_CMP_MASKED_EQ, PROT_EXEC, 0));
  }
  // A process that aborts sends the signal to itself, and to nobody else.
  failed |= ::seccomp_rule_add(filter.get(), SCMP_ACT_ALLOW, SCMP_SYS(tgkill), 1,
                               SCMP_A0(SCMP_CMP_EQ, static_cast<scmp_datum_t>(::getpid())));
  if (failed != 0 || ::seccomp_load(filter.get()) != 0) {
    return failure(ErrorCode::internal, "the system call filter cannot be set", "cage");
  }
  return {};
}

}  // namespace

Expected<void> enter_cage() {
  // With the parent gone nobody waits for an answer.
  ::prctl(PR_SET_PDEATHSIG, SIGKILL);
  ::close_range(archive::probe_file_descriptor + 1, ~0U, 0);
  if (::prctl(PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0) != 0)
    return system_failure(errno, "giving up privileges", "cage");
  if (auto limited = limit_resources(); !limited) return limited;
  return filter_calls();
}

}  // namespace bentlight::probe
