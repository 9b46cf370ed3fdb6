#include "ingest/native_aperture.h"

#include <algorithm>
#include <cmath>
#include <set>

namespace bentlight::ingest {

Expected<optics::Grid> native_grid(const archive::WavefrontFile& file, const archive::FrameReader& reader) {
  constexpr std::size_t sampled_frames = 16;
  const auto aperture = optics::Aperture::of(file.grid);
  if (!aperture) return failure(aperture);
  const std::size_t frames = reader.frames();
  std::set<std::size_t> sample;
  for (std::size_t i = 0; i < sampled_frames; ++i) {
    sample.insert(i * (frames - 1) / std::max<std::size_t>(1, sampled_frames - 1));
  }

  std::vector<std::size_t> finite(aperture->points(), 0);
  optics::FrameBlock block;
  archive::FrameReader::Scratch scratch;
  for (const std::size_t frame : sample) {
    if (auto read = reader.read({frame, 1}, *aperture, block, scratch); !read) return failure(read);
    for (std::size_t p = 0; p < block.points; ++p) finite[p] += std::isfinite(block.values[p]);
  }

  optics::Grid grid = file.grid;
  std::size_t point = 0;
  for (const optics::PointRun& run : aperture->runs()) {
    for (std::uint32_t i = 0; i < run.count; ++i, ++point) {
      if (2 * finite[point] < sample.size()) grid.mask[run.first + i] = 0;
    }
  }
  return grid;
}

}  // namespace bentlight::ingest
