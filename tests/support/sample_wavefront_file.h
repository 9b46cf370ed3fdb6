// A WavefrontFile with every field set to something of its own, and what "the same" means of two.
#pragma once

#include <gtest/gtest.h>

#include <cmath>
#include <limits>

#include "archive/structure_codec.h"
#include "archive/wavefront_file.h"

namespace bentlight::test {

inline archive::WavefrontFile sample_wavefront_file() {
  archive::WavefrontFile file;
  file.identity = {{.size_bytes = 123'456, .mtime_ns = 1'700'000'000'123'456'789, .inode = 1ULL << 63},
                   "0123abcd"};
  file.dataset = "/group/opd \u00b5";
  archive::FrameMap& map = file.map;
  map.shape = {2, 3, 4};
  map.axes = {2, 1, 0};
  map.element = archive::ElementType::float64;
  map.big_endian = true;
  map.scale = 0.1;
  map.offset = -1e-300;
  map.metres_per_unit = 1e-6;
  map.sign = -1;
  map.missing = -std::numeric_limits<double>::infinity();
  map.storage = archive::Storage::chunked;
  map.chunk_shape = {2, 3, 2};
  map.filters = {archive::Filter::shuffle, archive::Filter::deflate, archive::Filter::fletcher32};
  map.chunks = {{100'000, 4000, 5}, {0, 0, 0}};
  map.fill_value = std::numeric_limits<double>::quiet_NaN();
  file.grid = {
      .rows = 3, .columns = 2, .x_m = {-0.1, 0.1}, .y_m = {0.0, 0.1, 1.0 / 3.0}, .mask = {1, 0, 1, 1, 1, 0}};
  file.has_mask = true;
  file.time_s = {0.0, 0.1, 0.2, 0.3};
  file.frame_rate_hz = 10.0;
  file.conditions = {.campaign = "kiosk",
                     .run = "m05",
                     .source = "tunnel",
                     .note = "two\nlines",
                     .azimuth_deg = 1.0,
                     .elevation_deg = 2.0,
                     .aperture_diameter_m = 3.0,
                     .reference_length_m = 4.0,
                     .mach = 0.5,
                     .velocity_m_s = 6.0,
                     .density_kg_m3 = 7.0,
                     .temperature_k = 8.0,
                     .wavelength_m = 9.0,
                     .gladstone_dale_m3_kg = std::nullopt};
  file.signals = {{"pressure", "Pa", {1.0F, 2.0F, 3.0F, 0.1F}}, {"tracker", "", {0.0F, -1.0F, 5.0F, 1e-30F}}};
  return file;
}

/// Field by field where it is cheap to say which one differs; the rest by their facts, in which every field
/// has a name.
inline void expect_same(const archive::WavefrontFile& a, const archive::WavefrontFile& b) {
  const auto parts_a = archive::take_apart(a), parts_b = archive::take_apart(b);
  EXPECT_EQ(parts_a.facts, parts_b.facts);
  EXPECT_EQ(a.identity, b.identity);
  EXPECT_EQ(a.map.shape, b.map.shape);
  EXPECT_EQ(a.map.filters, b.map.filters);
  EXPECT_EQ(a.map.missing, b.map.missing);
  EXPECT_EQ(std::isnan(a.map.fill_value), std::isnan(b.map.fill_value));
  EXPECT_EQ(a.grid.x_m, b.grid.x_m);
  EXPECT_EQ(a.grid.y_m, b.grid.y_m);
  EXPECT_EQ(a.grid.mask, b.grid.mask);
  EXPECT_EQ(a.time_s, b.time_s);
  EXPECT_EQ(a.conditions.campaign, b.conditions.campaign);
  EXPECT_EQ(a.conditions.wavelength_m, b.conditions.wavelength_m);
  ASSERT_EQ(a.map.chunks.size(), b.map.chunks.size());
  for (std::size_t i = 0; i < a.map.chunks.size(); ++i) {
    EXPECT_EQ(a.map.chunks[i].offset, b.map.chunks[i].offset);
    EXPECT_EQ(a.map.chunks[i].bytes, b.map.chunks[i].bytes);
    EXPECT_EQ(a.map.chunks[i].filter_mask, b.map.chunks[i].filter_mask);
  }
  ASSERT_EQ(a.signals.size(), b.signals.size());
  for (std::size_t i = 0; i < a.signals.size(); ++i) {
    EXPECT_EQ(a.signals[i].name, b.signals[i].name);
    EXPECT_EQ(a.signals[i].unit, b.signals[i].unit);
    EXPECT_EQ(a.signals[i].values, b.signals[i].values);
  }
}

}  // namespace bentlight::test
