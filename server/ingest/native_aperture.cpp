#include "ingest/native_aperture.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <limits>
#include <vector>

namespace bentlight::ingest {

namespace {

// Few places, since each may cost a chunk to decode; several frames at each, since they cost nothing more
// then.
constexpr std::size_t sampled_places = 5;
constexpr std::size_t frames_at_a_place = 4;

// Fewer frames than this may well be alike at a point that lives.
constexpr std::uint32_t frames_to_call_a_point_dead = 8;

std::vector<optics::FrameRange> sample_of(std::size_t frames) {
  if (frames <= sampled_places * frames_at_a_place) return {{0, frames}};
  std::vector<optics::FrameRange> places;
  for (std::size_t i = 0; i < sampled_places; ++i) {
    places.push_back({i * (frames - frames_at_a_place) / (sampled_places - 1), frames_at_a_place});
  }
  return places;
}

/// What a sample of frames shows of each point.
struct Sighting {
  std::uint32_t frames = 0;           // that held anything
  float greatest = 0.0F;              // of all values, without their frame's shift
  std::vector<std::uint32_t> finite;  // [points]
  std::vector<double> low, high;      // [points]

  explicit Sighting(std::size_t points)
      : finite(points),
        low(points, std::numeric_limits<double>::infinity()),
        high(points, -std::numeric_limits<double>::infinity()) {}

  void add(std::span<const float> frame, double shift_m) {
    if (std::ranges::none_of(frame, [](float value) { return std::isfinite(value); })) return;
    ++frames;
    for (std::size_t p = 0; p < frame.size(); ++p) {
      if (!std::isfinite(frame[p])) continue;
      ++finite[p];
      greatest = std::max(greatest, std::abs(frame[p]));
      low[p] = std::min(low[p], frame[p] + shift_m);
      high[p] = std::max(high[p], frame[p] + shift_m);
    }
  }

  void merge(const Sighting& other) {
    frames += other.frames;
    greatest = std::max(greatest, other.greatest);
    for (std::size_t p = 0; p < finite.size(); ++p) {
      finite[p] += other.finite[p];
      low[p] = std::min(low[p], other.low[p]);
      high[p] = std::max(high[p], other.high[p]);
    }
  }

  bool is_light(std::size_t p) const { return 2 * finite[p] >= frames; }

  /// A value that does not move differs from frame to frame by the rounding to float about the frame's shift.
  bool is_dead(std::size_t p) const {
    const double rounding = 2.0 * std::numeric_limits<float>::epsilon() * static_cast<double>(greatest);
    return finite[p] >= frames_to_call_a_point_dead && high[p] - low[p] <= rounding;
  }
};

Expected<Sighting> sighting_of(const optics::Aperture& aperture,
                               const archive::FrameReader& reader,
                               WorkPool& pool,
                               const std::stop_token& stop) {
  const auto places = sample_of(reader.frames());
  std::vector<Sighting> parts(places.size(), Sighting(aperture.points()));
  const auto looked = pool.for_each(places.size(), stop, [&](std::size_t i, std::size_t) -> Expected<void> {
    optics::FrameBlock block;
    archive::FrameReader::Scratch scratch;
    if (auto read = reader.read(places[i], aperture, block, scratch); !read) return read;
    for (std::size_t f = 0; f < places[i].count; ++f) parts[i].add(block.frame(f), block.shift_m[f]);
    return {};
  });
  if (!looked) return failure(looked);
  for (std::size_t i = 1; i < parts.size(); ++i) parts[0].merge(parts[i]);
  return std::move(parts[0]);
}

}  // namespace

Expected<NativeAperture> native_aperture(const archive::WavefrontFile& file,
                                         const archive::FrameReader& reader,
                                         WorkPool& pool,
                                         const std::stop_token& stop) {
  const auto aperture = optics::Aperture::of(file.grid);
  if (!aperture) return failure(aperture);
  const auto seen = sighting_of(*aperture, reader, pool, stop);
  if (!seen) return failure(seen);
  NativeAperture native{.grid = file.grid};
  std::size_t point = 0;
  for (const optics::PointRun& run : aperture->runs()) {
    for (std::uint32_t i = 0; i < run.count; ++i, ++point) {
      if (!seen->is_light(point)) {
        native.grid.mask[run.first + i] = 0;
      } else if (seen->is_dead(point)) {
        ++native.dead_points;
      }
    }
  }
  return native;
}

}  // namespace bentlight::ingest
