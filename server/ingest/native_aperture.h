// Which points of a view carry light: the file's mask, and what its NaNs say.
#pragma once

#include "archive/frame_reader.h"
#include "archive/wavefront_file.h"
#include "base/error.h"
#include "optics/aperture.h"

namespace bentlight::ingest {

/// The grid of `file` with its native mask: points inside the file's mask that are finite in at least half of a sample
/// of frames spread over the record. A point that is NaN now and then stays inside; its frames are then not finite,
/// and counted.
///
///   errors  degenerate_aperture, those of FrameReader::read
Expected<optics::Grid> native_grid(const archive::WavefrontFile& file, const archive::FrameReader& reader);

}  // namespace bentlight::ingest
