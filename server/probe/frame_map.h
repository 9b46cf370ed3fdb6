// Where the frames of a dataset lie in the file, and how they are coded.
#pragma once

#include <string>

#include "archive/wavefront_file.h"
#include "base/error.h"
#include "probe/objects.h"

namespace bentlight::probe {

/// Fills shape, element, storage and chunks of the map of an open dataset; units and axes are the caller's.
///
///   errors  layout_mismatch, unsupported_storage, damaged_file, too_large
Expected<archive::FrameMap> read_frame_map(const OpenedFile& file, hid_t dataset, const std::string& path);

}  // namespace bentlight::probe
