// Writing one view of the demo archive.
#pragma once

#include <cstdint>
#include <filesystem>
#include <functional>
#include <stop_token>

#include "base/error.h"
#include "demo/histories.h"
#include "demo/scenario.h"
#include "demo/shapes.h"

namespace bentlight::demo {

/// Frames that are computed and written at once: whole chunks, a few megabytes.
std::size_t block_frames(const DemoOptions& options);
/// Frames of a chunk, for views that are kept in chunks.
std::size_t chunk_frames(const DemoOptions& options);

/// The name of a view's file while it is being written.
std::filesystem::path unfinished(const std::filesystem::path& file);

/// Writes a view's file below `folder`: first under another name, so that a reader of the archive sees it
/// whole or not at all. `wrote` hears of the bytes of frames after every block.
///
///   errors  as Hdf5Writer; cancelled. Nothing is left behind then.
Expected<void> write_view(const std::filesystem::path& folder,
                          const Scenario& scenario,
                          const DemoGrid& grid,
                          const View& view,
                          const Amplitudes& amplitudes,
                          const std::function<void(std::uint64_t)>& wrote,
                          const std::stop_token& stop);

}  // namespace bentlight::demo
