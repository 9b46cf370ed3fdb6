// Where the frames of a dataset lie in the file, and how they are coded.
#pragma once

#include <array>
#include <string>

#include "archive/wavefront_file.h"
#include "base/error.h"
#include "probe/objects.h"

namespace bentlight::probe {

/// The map of an open dataset whose frames, rows and columns lie along `axes`; units and scale are the
/// caller's.
///
///   needs   axes that are an order of 0, 1, 2
///   errors  layout_mismatch, unsupported_storage, damaged_file, too_large
Expected<archive::FrameMap> read_frame_map(const OpenedFile& file,
                                           hid_t dataset,
                                           const std::string& path,
                                           const std::array<int, 3>& axes);

}  // namespace bentlight::probe
