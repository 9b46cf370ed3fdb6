// The structure of a wavefront file, read by the HDF5 library inside the cage.
#pragma once

#include "archive/wavefront_file.h"
#include "base/error.h"
#include "probe/objects.h"

namespace bentlight::probe {

/// Everything but the frames. The parent verifies the numbers and knows the file's stamp.
///
///   errors  as archive::ProbeClient::read_structure
Expected<archive::WavefrontFile> read_structure(const OpenedFile& file, const archive::Layout& layout);

}  // namespace bentlight::probe
