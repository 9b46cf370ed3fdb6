// No number from a foreign file is used before it has passed here.
#pragma once

#include <cstdint>

#include "archive/wavefront_file.h"
#include "base/error.h"

namespace bentlight::archive {

/// Says whether every read that `map` leads to stays inside a file of `file_bytes`, no product overflows, and
/// the limits hold.
///
///   errors  layout_mismatch (no frames, axes that are no permutation), too_large, unsupported_storage,
///   damaged_file
///           (what is said of the file lies outside of it or contradicts itself)
Expected<void> verify(const FrameMap& map, std::uint64_t file_bytes);

/// The same for the rest: as many coordinates, mask points, times and signal values as the frames need, all
/// finite, coordinates rising, times not falling.
Expected<void> verify(const WavefrontFile& file);

}  // namespace bentlight::archive
