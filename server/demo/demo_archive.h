// The demo archive: wavefront files whose right answers are known.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <functional>
#include <stop_token>

#include "base/error.h"
#include "base/work_pool.h"

namespace bentlight::demo {

/// How frames are kept. `mixed` gives every kind that the reader knows: the simulation contiguous, the tunnel
/// chunked and deflated.
enum class DemoStorage { mixed, contiguous, chunked, deflate };

struct DemoOptions {
  std::size_t views_per_run = 24;  // 1 to 2000
  std::size_t frames = 2048;       // of each view, 64 to 10 million
  std::size_t grid = 64;           // points across the aperture, 8 to 512
  std::uint64_t seed = 1;
  DemoStorage storage = DemoStorage::mixed;
};

struct DemoProgress {
  std::size_t files_done = 0, files_total = 0;
  std::uint64_t bytes_done = 0, bytes_total = 0;  // of frames, before compression
};

struct DemoReport {
  std::size_t files = 0;
  std::uint64_t frame_bytes = 0;  // before compression
  std::filesystem::path known_answers;
};

/// Bytes of frames that an archive of these options holds, before compression.
std::uint64_t demo_frame_bytes(const DemoOptions& options);

/// Writes two runs of `views_per_run` files each below `folder`, with known_answers.json and README.txt
/// beside them. Equal options give equal bytes, whatever the pool.
///
///   errors   bad_option (an option out of range; a folder that holds something else: only an empty folder or
///   an
///            earlier demo archive is written to, and of the latter only its own files are replaced),
///            disk_full (also when the room would not suffice, before anything is written),
///            permission_denied, io_error, cancelled
///   threads  `progress` is called from the pool's threads, never twice at once
///   cost     bound by the product of time histories and shapes, about 67 multiply-adds to a value
Expected<DemoReport> write_demo_archive(const std::filesystem::path& folder,
                                        const DemoOptions& options,
                                        WorkPool& pool,
                                        const std::function<void(const DemoProgress&)>& progress = {},
                                        const std::stop_token& stop = {});

}  // namespace bentlight::demo
