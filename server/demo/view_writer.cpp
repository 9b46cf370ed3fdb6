#include "demo/view_writer.h"

#include <algorithm>
#include <array>
#include <cerrno>
#include <cmath>
#include <limits>
#include <span>
#include <string>
#include <system_error>
#include <utility>

#include "archive/hdf5_writer.h"
#include "demo/normal_numbers.h"

namespace bentlight::demo {

namespace {

using archive::Hdf5Writer;
using Step = Expected<void>;

constexpr std::uint64_t sensor_stream = 512;  // counted from View::stream
// A product of few rows is bound by repacking the shapes: 4 MiB were a third slower, 32 MiB fall out of the
// cache.
constexpr std::size_t block_bytes = 16 << 20;
constexpr std::size_t chunk_bytes = 1 << 20;

std::size_t frame_bytes(const DemoOptions& options) {
  return options.grid * options.grid * sizeof(float);
}

/// What each frame of the file shows, and when it says it was taken; both as instants of the undisturbed
/// clock.
struct FramePlan {
  std::vector<std::size_t> shown, taken;
  std::size_t instants() const { return taken.back() + 1; }
};

FramePlan frame_plan(const View& view, std::size_t frames) {
  FramePlan plan;
  auto gap = view.flaws.gaps.begin();
  auto repeated = view.flaws.repeated_frames.begin();
  std::size_t instant = 0;
  for (std::size_t frame = 0; frame < frames; ++frame, ++instant) {
    if (gap != view.flaws.gaps.end() && gap->before_frame == frame) instant += (gap++)->frames;
    const bool repeats = repeated != view.flaws.repeated_frames.end() && *repeated == frame;
    if (repeats) ++repeated;
    plan.taken.push_back(instant);
    plan.shown.push_back(repeats ? plan.shown.back() : instant);
  }
  return plan;
}

archive::DatasetStorage storage_of(const View& view, const DemoOptions& options) {
  archive::DatasetStorage storage;
  if (view.storage == ViewStorage::contiguous) return storage;
  const std::size_t across = view.chunks_split_frames ? (options.grid + 1) / 2 : options.grid;
  storage.chunk = {chunk_frames(options), across, across};
  if (view.storage == ViewStorage::deflate) {
    storage.deflate_level = view.deflate_level;
    storage.shuffle = true;
    storage.fletcher32 = view.fletcher32;
  }
  return storage;
}

/// The product of histories and shapes, a block of frames at a time.
class FrameMaker {
 public:
  FrameMaker(ShapeMatrix shapes, const ShapeOrder& order, std::size_t frames)
      : order_(order), shapes_(std::move(shapes)) {
    const auto rows = static_cast<Eigen::Index>(frames);
    weights_.resize(rows, order.count());
    even_.resize(rows, shapes_.cols());
    odd_.resize(rows, shapes_.cols());
  }

  /// Where the weights of the block's i-th frame go.
  float* weights(std::size_t i) { return weights_.row(static_cast<Eigen::Index>(i)).data(); }

  void make(std::size_t frames) {
    const auto rows = static_cast<Eigen::Index>(frames);
    even_.topRows(rows).noalias() =
        weights_.topLeftCorner(rows, order_.even_count()) * shapes_.topRows(order_.even_count());
    odd_.topRows(rows).noalias() =
        weights_.topRightCorner(rows, order_.odd_count()).eval() * shapes_.bottomRows(order_.odd_count());
  }

  void unfold_frame(std::size_t i, std::span<float> frame) const {
    const auto row = static_cast<Eigen::Index>(i);
    const auto half = static_cast<std::size_t>(even_.cols());
    unfold({even_.row(row).data(), half}, {odd_.row(row).data(), half}, frame);
  }

 private:
  ShapeOrder order_;
  ShapeMatrix shapes_;      // [shapes][half grid]
  ShapeMatrix weights_;     // [frames][shapes]
  ShapeMatrix even_, odd_;  // [frames][half grid]
};

/// Carries one view from its plan to its file.
class ViewFile {
 public:
  ViewFile(const Scenario& scenario,
           const DemoGrid& grid,
           const View& view,
           const Amplitudes& amplitudes,
           Hdf5Writer& writer)
      : scenario_(scenario),
        grid_(grid),
        view_(view),
        writer_(writer),
        tunnel_(view.run == Run::tunnel),
        units_per_metre_(tunnel_ ? 1e6 : 1.0),
        plan_(frame_plan(view, scenario.options.frames)),
        histories_(scenario, view, amplitudes, plan_.instants()),
        sensor_(scenario.options.seed, view.stream + sensor_stream) {}

  Step write(const std::function<void(std::uint64_t)>& wrote, const std::stop_token& stop);

 private:
  Step write_conditions();
  Step write_geometry();
  Step write_clock_and_signals();
  Step write_signal(const std::string& name,
                    const std::string& unit,
                    float (Histories::*value)(std::size_t) const);
  Step write_frames(const std::function<void(std::uint64_t)>& wrote, const std::stop_token& stop);
  void disturb(std::size_t frame, std::span<float> values) const;

  const Scenario& scenario_;
  const DemoGrid& grid_;
  const View& view_;
  Hdf5Writer& writer_;
  bool tunnel_;
  double units_per_metre_;
  FramePlan plan_;
  Histories histories_;
  NormalNumbers sensor_;
};

Step ViewFile::write(const std::function<void(std::uint64_t)>& wrote, const std::stop_token& stop) {
  return write_conditions()
      .and_then([&] { return write_geometry(); })
      .and_then([&] { return write_clock_and_signals(); })
      .and_then([&] { return write_frames(wrote, stop); })
      .and_then([&] { return writer_.close(); });
}

Step ViewFile::write_conditions() {
  const Setting& setting = scenario_.setting;
  const std::pair<const char*, archive::AttributeValue> attributes[] = {
      {"layout_version", std::int64_t{1}},
      {"campaign", std::string(campaign_name)},
      {"run", run_name(view_.run)},
      {"source", source_name(view_.run)},
      {"azimuth_deg", view_.azimuth_deg},
      {"elevation_deg", view_.elevation_deg},
      {"aperture_diameter_m", setting.aperture_diameter_m},
      {"reference_length_m", setting.reference_length_m},
      {"mach", setting.mach},
      {"velocity_m_s", setting.velocity_m_s},
      {"density_kg_m3", setting.density_kg_m3},
      {"temperature_k", setting.temperature_k},
      {"wavelength_m", setting.wavelength_m},
      {"gladstone_dale_m3_kg", setting.gladstone_dale_m3_kg},
      {"note", std::string("Synthetic, written by bentlight demo; see known_answers.json")},
  };
  for (const auto& [name, value] : attributes) {
    if (auto done = writer_.attribute("/", name, value); !done) return done;
  }
  return {};
}

Step ViewFile::write_geometry() {
  const std::array<std::uint64_t, 1> line = {grid_.across};
  const std::array<std::uint64_t, 2> plane = {grid_.across, grid_.across};
  for (const std::string axis : {"/x", "/y"}) {
    if (auto done = writer_.dataset<double>(axis, line, grid_.centers_m); !done) return done;
    if (auto done = writer_.attribute(axis, "unit", std::string("m")); !done) return done;
  }
  // The tunnel's files mark the outside by NaN, the simulation's by a mask.
  return tunnel_ ? Step() : writer_.dataset<std::uint8_t>("/mask", plane, grid_.inside);
}

Step ViewFile::write_clock_and_signals() {
  if (auto done = write_signal("surface_pressure", "Pa", &Histories::surface_pressure_pa); !done) return done;
  // A simulation's frames are evenly spaced, so their rate says it all.
  if (!tunnel_) return writer_.attribute("/", "frame_rate_hz", scenario_.setting.frame_rate_hz);
  if (auto done = write_signal("accelerometer", "m/s2", &Histories::acceleration_m_s2); !done) return done;
  std::vector<double> time_s;
  for (const std::size_t instant : plan_.taken) {
    time_s.push_back(static_cast<double>(instant) / scenario_.setting.frame_rate_hz);
  }
  const std::array<std::uint64_t, 1> shape = {time_s.size()};
  return writer_.dataset<double>("/time", shape, time_s).and_then([&] {
    return writer_.attribute("/time", "unit", std::string("s"));
  });
}

Step ViewFile::write_signal(const std::string& name,
                            const std::string& unit,
                            float (Histories::*value)(std::size_t) const) {
  std::vector<float> values;
  for (const std::size_t instant : plan_.taken) values.push_back((histories_.*value)(instant));
  const std::array<std::uint64_t, 1> shape = {values.size()};
  const std::string path = "/signals/" + name;
  return writer_.dataset<float>(path, shape, values).and_then([&] {
    return writer_.attribute(path, "unit", unit);
  });
}

/// What sensor and data system do to a frame: noise, the sensor's step, and the view's flaws.
void ViewFile::disturb(std::size_t frame, std::span<float> values) const {
  if (!tunnel_) return;
  const TunnelEffects& effects = scenario_.tunnel;
  sensor_.add_to(plan_.shown[frame], static_cast<float>(effects.sensor_noise_m * units_per_metre_), values);
  // Adding 1.5 * 2^23 steps leaves no bits for less than a step; subtracting it brings the rounded value
  // back.
  const float shift = static_cast<float>(effects.resolution_m * units_per_metre_) * 12582912.0F;
  for (float& value : values) value = (value + shift) - shift;

  if (const auto& patch = view_.flaws.dead_patch) {
    for (std::size_t row = patch->row; row < patch->row + patch->rows; ++row) {
      std::fill_n(values.begin() + static_cast<std::ptrdiff_t>(row * grid_.across + patch->column),
                  patch->columns, static_cast<float>(patch->value_m * units_per_metre_));
    }
  }
  if (std::binary_search(view_.flaws.nan_frames.begin(), view_.flaws.nan_frames.end(), frame)) {
    std::fill(values.begin(), values.end(), std::numeric_limits<float>::quiet_NaN());
  }
}

Step ViewFile::write_frames(const std::function<void(std::uint64_t)>& wrote, const std::stop_token& stop) {
  const std::size_t points = grid_.inside.size(), at_once = block_frames(scenario_.options);
  const std::size_t count = plan_.taken.size();
  const float outside = tunnel_ ? std::numeric_limits<float>::quiet_NaN() : 0.0F;
  FrameMaker maker(half_shapes(scenario_, grid_, view_.steady, units_per_metre_, outside),
                   ShapeOrder(scenario_), at_once);
  std::vector<float> values(at_once * points);

  const std::array<std::uint64_t, 3> shape = {count, grid_.across, grid_.across};
  auto begun =
      writer_.begin<float>("/opd", shape, storage_of(view_, scenario_.options))
          .and_then([&] { return writer_.attribute("/opd", "unit", std::string(tunnel_ ? "um" : "m")); })
          .and_then([&] { return writer_.attribute("/opd", "sign", std::int64_t{1}); })
          .and_then([&] {
            return writer_.axes("/opd", std::array<std::string, 3>{tunnel_ ? "/time" : "", "/y", "/x"});
          });
  if (!begun) return begun;

  for (std::size_t first = 0; first < count; first += at_once) {
    if (stop.stop_requested()) return failure(ErrorCode::cancelled, "writing the demo archive was cancelled");
    const std::size_t here = std::min(at_once, count - first);
    for (std::size_t i = 0; i < here; ++i) histories_.weights_at(plan_.shown[first + i], maker.weights(i));
    maker.make(here);
    for (std::size_t i = 0; i < here; ++i) {
      const std::span frame(values.data() + i * points, points);
      maker.unfold_frame(i, frame);
      disturb(first + i, frame);
    }
    const auto block = std::span<const float>(values).first(here * points);
    if (auto done = writer_.append<float>("/opd", first, here, block); !done) return done;
    wrote(here * points * sizeof(float));
  }
  return {};
}

Step write_file(const std::filesystem::path& path,
                const Scenario& scenario,
                const DemoGrid& grid,
                const View& view,
                const Amplitudes& amplitudes,
                const std::function<void(std::uint64_t)>& wrote,
                const std::stop_token& stop) {
  auto writer = Hdf5Writer::create(path);
  if (!writer) return failure(writer);
  return ViewFile(scenario, grid, view, amplitudes, *writer).write(wrote, stop);
}

}  // namespace

std::size_t chunk_frames(const DemoOptions& options) {
  return std::clamp<std::size_t>(chunk_bytes / frame_bytes(options), 1, options.frames);
}

std::size_t block_frames(const DemoOptions& options) {
  // At least 16 frames, for a product of fewer rows is bound by fetching the shapes.
  const std::size_t chunk = chunk_frames(options);
  const std::size_t wanted = std::max<std::size_t>(16, block_bytes / frame_bytes(options));
  return std::max<std::size_t>(1, (wanted + chunk - 1) / chunk) * chunk;
}

std::filesystem::path unfinished(const std::filesystem::path& file) {
  return std::filesystem::path(file).concat(".part");
}

Expected<void> write_view(const std::filesystem::path& folder,
                          const Scenario& scenario,
                          const DemoGrid& grid,
                          const View& view,
                          const Amplitudes& amplitudes,
                          const std::function<void(std::uint64_t)>& wrote,
                          const std::stop_token& stop) {
  const std::filesystem::path path = folder / view.file;
  const std::filesystem::path aside = unfinished(path);
  std::error_code error;
  std::filesystem::create_directories(path.parent_path(), error);
  if (error) return system_failure(error.value(), "making the folder", path.parent_path().string());
  auto written = write_file(aside, scenario, grid, view, amplitudes, wrote, stop);
  if (!written) {
    std::filesystem::remove(aside, error);
    return written;
  }
  std::filesystem::rename(aside, path, error);
  if (error) return system_failure(error.value(), "renaming", aside.string());
  return {};
}

}  // namespace bentlight::demo
