// What is known of a wavefront file once the probe has read its structure: everything but the frames.
#pragma once

#include <array>
#include <cstdint>
#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/file.h"
#include "optics/aperture.h"

namespace bentlight::archive {

/// Which file, in which state.
struct FileIdentity {
  FileStamp stamp;
  std::string metadata_digest;  // SHA-256 over the structure's bytes as the probe read them
  bool operator==(const FileIdentity&) const = default;
};

enum class ElementType { float32, float64, int16, int32 };
enum class Storage { contiguous, chunked };
enum class Filter { deflate, shuffle, fletcher32 };

struct Chunk {
  std::uint64_t offset = 0;      // in the file
  std::uint32_t bytes = 0;       // stored; 0: never written, holds the fill value
  std::uint32_t filter_mask = 0;  // bit i set: filter i of the pipeline was skipped
};

/// Where the frames of one view lie and how to make metres of them.
///
///   value_m = sign * (stored * scale + offset) * metres_per_unit
struct FrameMap {
  std::array<std::uint64_t, 3> shape{};   // as stored
  std::array<int, 3> axes = {0, 1, 2};    // which stored axis holds frames, rows, columns
  ElementType element = ElementType::float32;
  bool big_endian = false;
  double scale = 1.0;
  double offset = 0.0;
  double metres_per_unit = 1.0;
  int sign = 1;
  std::optional<double> missing;  // a stored value that stands for "no light here", read as NaN

  Storage storage = Storage::contiguous;
  std::uint64_t data_offset = 0;             // contiguous
  std::array<std::uint64_t, 3> chunk_shape{};  // chunked
  std::vector<Filter> filters;               // in the order of writing
  std::vector<Chunk> chunks;                 // row-major over the grid of chunks
  double fill_value = 0.0;

  std::uint64_t frames() const { return shape[static_cast<std::size_t>(axes[0])]; }
  std::uint64_t rows() const { return shape[static_cast<std::size_t>(axes[1])]; }
  std::uint64_t columns() const { return shape[static_cast<std::size_t>(axes[2])]; }
};

/// The conditions under which a view was taken; what the file does not say stays empty.
struct Conditions {
  std::string campaign;
  std::string run;
  std::string source;  // "simulation", "tunnel", "flight" or what the file says
  std::string note;
  std::optional<double> azimuth_deg, elevation_deg;
  std::optional<double> aperture_diameter_m, reference_length_m;
  std::optional<double> mach, velocity_m_s, density_kg_m3, temperature_k;
  std::optional<double> wavelength_m, gladstone_dale_m3_kg;
};

/// A companion signal on the frames' clock.
struct Signal {
  std::string name;
  std::string unit;
  std::vector<float> values;  // [frames]
};

struct WavefrontFile {
  FileIdentity identity;
  std::string dataset;  // path inside the file, "/opd"
  FrameMap map;
  optics::Grid grid;  // its mask is the file's mask alone; NaN outside the light is found while indexing
  bool has_mask = false;
  std::vector<double> time_s;  // [frames], or empty when only the rate is known
  double frame_rate_hz = 0.0;  // from the attribute, or the median step of time_s
  Conditions conditions;
  std::vector<Signal> signals;

  /// The instant of a frame.
  double time_of(std::size_t frame) const {
    return time_s.empty() ? static_cast<double>(frame) / frame_rate_hz : time_s[frame];
  }
};

/// Where, in somebody's HDF5 layout, the parts of a wavefront file are. The defaults are the project's own layout.
struct Layout {
  std::string dataset = "/opd";
  std::array<int, 3> axes = {0, 1, 2};  // which stored axis holds frames, rows, columns
  std::optional<std::string> unit;      // instead of the dataset's attribute `unit`
  double scale = 1.0;
  double offset = 0.0;
  std::optional<int> sign;              // instead of the dataset's attribute `sign`
  std::string time = "/time";
  std::string mask = "/mask";
  std::string x = "/x";
  std::string y = "/y";
  std::string signals = "/signals";
};

/// Keeps what is known of a file in `folder` (wavefront_file.json and NPY files), for load_wavefront_file.
///
///   errors  as FileSystem::create
Expected<void> save_wavefront_file(const FileSystem& files, const std::filesystem::path& folder,
                                   const WavefrontFile& file);

/// errors  damaged_state when a number is missing, or lies outside the file it describes
Expected<WavefrontFile> load_wavefront_file(const FileSystem& files, const std::filesystem::path& folder);

}  // namespace bentlight::archive
