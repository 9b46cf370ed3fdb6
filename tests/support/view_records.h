// Records of views, for tests of the index.
#pragma once

#include <fmt/format.h>

#include <random>
#include <string>

#include "index/index.h"

namespace bentlight::test {

/// A record with every field set to something of its own; the angles make the id.
inline index::ViewRecord view_record(const std::string& path,
                                     double azimuth_deg = 90,
                                     double elevation_deg = 30) {
  index::ViewRecord view;
  view.path = path;
  view.dataset = "/opd";
  view.campaign_name = "Wall Dome";
  view.run_name = "M05 tunnel";
  view.source = "tunnel";
  view.note = "two\nlines, 'quoted'";
  view.azimuth_deg = azimuth_deg;
  view.elevation_deg = elevation_deg;
  view.aperture_diameter_m = 0.1;
  view.reference_length_m = 0.2;
  view.mach = 0.5;
  view.velocity_m_s = 170.0;
  view.density_kg_m3 = 1.1;
  view.temperature_k = 288.15;
  view.wavelength_m = 1e-6;
  view.gladstone_dale_m3_kg = 2.27e-4;
  view.frames = 1000;
  view.rows = 64;
  view.columns = 60;
  view.points = 3000;
  view.finite_frames = 999;
  view.frame_rate_hz = 25e3;
  view.duration_s = 999.0 / 25e3;
  view.start_s = 0.125;
  view.stamp = {
      .size_bytes = 16'000'000, .mtime_ns = 1'700'000'000'123'456'789, .inode = ~std::uint64_t{0} - 5};
  view.metadata_digest = "0123abcd";
  view.folder = "folder-of-" + path;
  view.indexed_at_ms = 1'700'000'000'123;
  view.checks = R"([{"code":"dropped-frames"}])";
  view.opd_rms_mean_m = 0.1 + 1e-17;
  view.opd_rms_overall_m = 1.0 / 3.0;
  return view;
}

}  // namespace bentlight::test
