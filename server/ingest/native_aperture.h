// Which points of a view carry light: the file's mask, and what a sample of its frames says.
#pragma once

#include <cstddef>
#include <stop_token>

#include "archive/frame_reader.h"
#include "archive/wavefront_file.h"
#include "base/error.h"
#include "base/work_pool.h"
#include "optics/aperture.h"

namespace bentlight::ingest {

struct NativeAperture {
  optics::Grid grid;            // of the file, with the native mask
  std::size_t dead_points = 0;  // inside the mask, whose value is the same in every sampled frame
};

/// The native mask: points inside the file's mask that are finite in at least half of a sample of frames
/// spread over the record. A point that is NaN now and then stays inside; its frames are then not finite, and
/// counted. A frame without any finite value says nothing about the points.
///
///   errors  degenerate_aperture, cancelled, those of FrameReader::read
Expected<NativeAperture> native_aperture(const archive::WavefrontFile& file,
                                         const archive::FrameReader& reader,
                                         WorkPool& pool,
                                         const std::stop_token& stop);

}  // namespace bentlight::ingest
