#include "archive/probe_client.h"

#include <fmt/format.h>
#include <signal.h>

#include <span>
#include <utility>
#include <vector>

#include "archive/child.h"
#include "archive/probe_protocol.h"
#include "archive/structure_codec.h"
#include "archive/verify.h"
#include "base/limits.h"

namespace bentlight::archive {

namespace {

bool is_fault_of_the_installation(int exit_code) {
  return exit_code == probe_exit::no_file || exit_code == probe_exit::no_library ||
         exit_code == probe_exit::no_cage || exit_code == probe_exit::not_started;
}

/// Why a child that should have answered did not.
Expected<void> judged(const ChildEnd& end) {
  const auto seconds = limits::probe_seconds.count();
  if (end.out_of_time || end.signal == SIGXCPU) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("the parser did not come to an end within {} s", seconds));
  }
  if (end.out_of_output) {
    return failure(ErrorCode::too_large, fmt::format("the file's structure takes more than {} MiB",
                                                     limits::probe_reply_bytes / limits::mebi));
  }
  if (end.signal != 0) {
    return failure(ErrorCode::damaged_file, fmt::format("the parser died by signal {}", end.signal));
  }
  if (is_fault_of_the_installation(end.exit_code)) {
    return failure(ErrorCode::io_error,
                   fmt::format("the probe could not do its work (exit code {})", end.exit_code));
  }
  if (end.exit_code != 0) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("the parser broke off (exit code {})", end.exit_code));
  }
  return {};
}

/// A file in one state: opened and stamped, and asked about. `Read` makes the answer of the reply's bytes and
/// the stamp.
template <class Read>
auto asked(const std::filesystem::path& program,
           const FileSystem& files,
           const std::filesystem::path& path,
           std::vector<std::string> question,
           const Read& read) -> decltype(read(std::span<const std::byte>(), FileStamp())) {
  const auto file = files.open(path);
  if (!file) return failure(file);
  const auto before = (*file)->stamp();
  if (!before) return failure(before);
  const auto end = run_child({.program = program,
                              .arguments = std::move(question),
                              .file_descriptor = (*file)->descriptor(),
                              .file_descriptor_there = probe_file_descriptor,
                              .time_limit = limits::probe_seconds,
                              .output_limit_bytes = limits::probe_reply_bytes});
  if (!end) return failure(end);
  const auto after = (*file)->stamp();
  if (!after) return failure(after);
  // Before the child is judged: a file that is being rewritten may well look damaged.
  if (*after != *before)
    return failure(ErrorCode::file_changed, "the file changed while its structure was read");
  if (const auto judgement = judged(*end); !judgement) return failure(judgement);
  return read(end->output, *before);
}

/// Every failure names the file; what inside the file it is about, the text says.
template <class Result>
Expected<Result> about(const std::filesystem::path& path, Expected<Result> result) {
  if (!result && result.error().code != ErrorCode::io_error) result.error().subject = path.string();
  return result;
}

}  // namespace

Expected<WavefrontFile> ProbeClient::read_structure(const FileSystem& files,
                                                    const std::filesystem::path& file,
                                                    const Layout& layout) const {
  const auto read = [](std::span<const std::byte> reply, const FileStamp& stamp) -> Expected<WavefrontFile> {
    auto structure = structure_from_reply(reply);
    if (!structure) return structure;
    structure->identity.stamp = stamp;
    if (const auto verified = verify(*structure); !verified) return failure(verified);
    return structure;
  };
  return about(file, asked(program_, files, file, {"structure", to_json(layout).dump()}, read));
}

Expected<std::string> ProbeClient::describe(const FileSystem& files,
                                            const std::filesystem::path& file) const {
  const auto read = [](std::span<const std::byte> reply, const FileStamp&) { return tree_from_reply(reply); };
  return about(file, asked(program_, files, file, {"describe"}, read));
}

}  // namespace bentlight::archive
