// Reading every frame of a view once and keeping what most questions need.
#pragma once

#include <atomic>
#include <cstdint>
#include <filesystem>
#include <stop_token>

#include "archive/frame_reader.h"
#include "base/error.h"
#include "base/file.h"
#include "base/work_pool.h"
#include "index/summary_store.h"
#include "optics/aperture.h"

namespace bentlight::ingest {

struct SummarizeOptions {
  std::size_t retained_bytes = 0;  // frames kept in memory between the passes; beyond it they are read again
};

/// The summary of a view, written into `folder`, which is not published yet.
///
/// Two passes over its frames: the first gives everything but the mean squares about the steady lensing,
/// which is known only when the record is over; the second gives those. Frames are kept in memory from one
/// pass to the next as far as `retained_bytes` goes, so that a view of that size is read and decoded once.
///
///   bytes_done  counts the file's bytes as they are done with, for progress; of those that are read twice,
///               half each time
///   errors      degenerate_aperture, those of FrameReader::read, of SummaryWriter, cancelled
///   cost        frames x points x modes multiply-adds; memory: what is retained, 8 bytes x frames x modes,
///               and some dozens of 12 bytes x points
Expected<index::SummaryData> summarize_view(const archive::FrameReader& reader,
                                            const optics::Grid& grid,
                                            const optics::Aperture& aperture,
                                            const FileSystem& files,
                                            const std::filesystem::path& folder,
                                            const SummarizeOptions& options,
                                            WorkPool& pool,
                                            const std::stop_token& stop,
                                            std::atomic<std::uint64_t>& bytes_done);

}  // namespace bentlight::ingest
