// bentlight-probe: parses one foreign HDF5 file in a cage, says what it found, and ends. Started by
// archive::ProbeClient; archive/probe_protocol.h says how the two speak.
#include <hdf5.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <cstdio>
#include <new>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "archive/probe_protocol.h"
#include "archive/structure_codec.h"
#include "probe/cage.h"
#include "probe/fd_driver.h"
#include "probe/objects.h"
#include "probe/structure.h"
#include "probe/tree.h"

namespace {

using namespace bentlight;
using Reply = std::vector<std::byte>;

bool write_all(std::span<const std::byte> bytes) {
  while (!bytes.empty()) {
    const ssize_t put = ::write(archive::probe_output_descriptor, bytes.data(), bytes.size());
    if (put < 0 && errno == EINTR) continue;
    if (put < 0) return false;
    bytes = bytes.subspan(static_cast<std::size_t>(put));
  }
  return true;
}

Expected<Reply> structure(const probe::OpenedFile& file, std::string_view layout_text) {
  const auto json = nlohmann::json::parse(layout_text, nullptr, /*allow_exceptions=*/false);
  const auto layout = archive::layout_from_json(json);
  if (!layout) return failure(layout);
  const auto found = probe::read_structure(file, *layout);
  if (!found) return failure(found);
  return archive::structure_reply(*found);
}

Expected<Reply> tree(const probe::OpenedFile& file) {
  const auto found = probe::describe(file);
  if (!found) return failure(found);
  return archive::tree_reply(*found);
}

Expected<Reply> answer(probe::FdFile& source, std::span<char*> question) {
  const auto file = probe::open_hdf5(source);
  if (!file) return failure(file);
  if (std::string_view(question[0]) == "structure" && question.size() == 2)
    return structure(*file, question[1]);
  if (std::string_view(question[0]) == "describe") return tree(*file);
  return failure(ErrorCode::internal, "the probe was asked something it does not know");
}

/// Never throws: an answer that memory does not suffice for is an answer too.
Reply reply_to(probe::FdFile& source, std::span<char*> question) {
  try {
    auto reply = answer(source, question);
    return reply ? std::move(*reply) : archive::error_reply(reply.error());
  } catch (const std::bad_alloc&) {
    return archive::error_reply({ErrorCode::damaged_file, "the parser ran out of memory on this file"});
  } catch (const std::length_error&) {
    return archive::error_reply({ErrorCode::damaged_file, "the file speaks of more than memory can hold"});
  }
}

}  // namespace

int main(int argument_count, char** arguments) {
  struct stat status {};
  if (argument_count < 2 || ::fstat(archive::probe_file_descriptor, &status) != 0) {
    std::fputs("bentlight-probe is started by bentlight, with an open file; it has no use of its own\n",
               stderr);
    return archive::probe_exit::no_file;
  }
  // The library sets itself up before the cage closes; it meets the file only after.
  if (H5open() < 0 || H5PLset_loading_state(0) < 0) return archive::probe_exit::no_library;
  H5Eset_auto2(H5E_DEFAULT, nullptr, nullptr);
  probe::FdFile source(archive::probe_file_descriptor, static_cast<std::uint64_t>(status.st_size));
  if (!probe::enter_cage()) return archive::probe_exit::no_cage;
  const bool is_said =
      write_all(reply_to(source, {arguments + 1, static_cast<std::size_t>(argument_count - 1)}));
  // Without the library's tidying up, which would walk over what a hostile file has left behind.
  ::_exit(is_said ? 0 : 1);
}
