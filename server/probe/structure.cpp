#include "probe/structure.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <string_view>
#include <utility>
#include <variant>
#include <vector>

#include "base/limits.h"
#include "base/text.h"
#include "probe/frame_map.h"
#include "probe/hdf5_error.h"

namespace bentlight::probe {

namespace {

using archive::Conditions;
using archive::FrameMap;
using archive::Layout;
using archive::Signal;
using archive::WavefrontFile;

struct Unit {
  std::string_view name;
  double in_si;
};

constexpr Unit lengths[] = {{"m", 1.0},        {"mm", 1e-3},     {"um", 1e-6}, {"\u00b5m", 1e-6},
                            {"\u03bcm", 1e-6}, {"micron", 1e-6}, {"nm", 1e-9}};
constexpr Unit times[] = {{"s", 1.0},        {"ms", 1e-3},      {"us", 1e-6},
                          {"\u00b5s", 1e-6}, {"\u03bcs", 1e-6}, {"ns", 1e-9}};

Expected<double> unit_in_si(std::span<const Unit> units, const std::string& name, const std::string& of) {
  for (const Unit& unit : units) {
    if (unit.name == name) return unit.in_si;
  }
  std::vector<std::string> accepted;
  for (const Unit& unit : units) accepted.emplace_back(unit.name);
  return failure(ErrorCode::layout_mismatch,
                 fmt::format("the unit of '{}' is '{}'; known are {}", of, name, fmt::join(accepted, ", ")));
}

/// One reading of one file.
class StructureReader {
 public:
  StructureReader(const OpenedFile& file, const Layout& layout) : file_(file), layout_(layout) {}

  Expected<WavefrontFile> run() {
    if (auto opened = open_frames(); !opened) return failure(opened);
    for (const auto step :
         {&StructureReader::read_map, &StructureReader::read_conditions, &StructureReader::read_times,
          &StructureReader::read_mask, &StructureReader::read_grid, &StructureReader::read_signals}) {
      if (auto done = (this->*step)(); !done) return failure(done);
    }
    found_.identity.metadata_digest = file_.source.metadata_digest();
    return std::move(found_);
  }

 private:
  Expected<void> open_frames() {
    root_ = Handle(H5Gopen2(file_.id(), "/", H5P_DEFAULT), H5Gclose);
    if (!root_) return library_failure(file_.source, "opening the root group");
    auto dataset = find_dataset(file_, layout_.dataset);
    if (!dataset) return failure(dataset);
    if (!*dataset) {
      return failure(ErrorCode::layout_mismatch, fmt::format("there is no dataset '{}'", layout_.dataset));
    }
    frames_ = std::move(**dataset);
    found_.dataset = layout_.dataset;
    return {};
  }

  // Attributes: those of the dataset are nearer to the frames than those of the file.

  Expected<std::optional<AttributeContent>> find(hid_t object,
                                                 std::initializer_list<const char*> names) const {
    for (const char* name : names) {
      auto found = attribute(file_.source, object, name);
      if (!found || *found) return found;
    }
    return std::optional<AttributeContent>();
  }

  Expected<std::optional<AttributeContent>> find(const char* name) const {
    auto found = find(frames_.id(), {name});
    if (!found || *found) return found;
    return find(root_.id(), {name});
  }

  /// A number, also one written as text. NaN stands for "not known" and is none.
  static Expected<std::optional<double>> as_number(const Expected<std::optional<AttributeContent>>& content,
                                                   std::string_view name) {
    if (!content) return failure(content);
    if (!*content) return std::optional<double>();
    std::optional<double> value;
    if (const auto* number = std::get_if<double>(&**content)) {
      value = *number;
    } else {
      const auto& text = std::get<Text>(**content);
      if (text.empty()) return std::optional<double>();
      value = parse_number(text);
      if (!value) {
        return failure(ErrorCode::layout_mismatch,
                       fmt::format("the attribute '{}' is '{}', where a number is expected", name, text));
      }
    }
    if (!std::isfinite(*value)) return std::optional<double>();
    return value;
  }

  static Expected<Text> as_text(const Expected<std::optional<AttributeContent>>& content) {
    if (!content) return failure(content);
    if (!*content) return Text();
    if (const auto* number = std::get_if<double>(&**content)) return shortest(*number);
    return std::get<Text>(**content);
  }

  /// The unit of an object in SI; `otherwise` when it names none.
  Expected<std::optional<double>> unit_of(hid_t object,
                                          const std::string& path,
                                          std::span<const Unit> units) const {
    const auto content = find(object, {"unit", "units"});
    if (!content) return failure(content);
    if (!*content) return std::optional<double>();
    const auto name = as_text(content);
    if (!name) return failure(name);
    const auto in_si = unit_in_si(units, *name, path);
    if (!in_si) return failure(in_si);
    return *in_si;
  }

  // The map.

  Expected<void> read_map() {
    std::array<int, 3> sorted = layout_.axes;
    std::ranges::sort(sorted);
    if (sorted != std::array<int, 3>{0, 1, 2}) {
      return failure(ErrorCode::layout_mismatch, "the layout's axes are not an order of 0, 1, 2");
    }
    auto map = read_frame_map(file_, frames_.id(), layout_.dataset, layout_.axes);
    if (!map) return failure(map);
    found_.map = std::move(*map);
    for (const auto step :
         {&StructureReader::read_unit, &StructureReader::read_sign, &StructureReader::read_scale}) {
      if (auto done = (this->*step)(); !done) return done;
    }
    return {};
  }

  Expected<void> read_unit() {
    if (layout_.unit) {
      const auto in_si = unit_in_si(lengths, *layout_.unit, layout_.dataset);
      if (!in_si) return failure(in_si);
      found_.map.metres_per_unit = *in_si;
      return {};
    }
    const auto unit = unit_of(frames_.id(), layout_.dataset, lengths);
    if (!unit) return failure(unit);
    if (!*unit) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("'{}' lacks the attribute 'unit': m, mm, um or nm", layout_.dataset));
    }
    found_.map.metres_per_unit = **unit;
    return {};
  }

  Expected<void> read_sign() {
    double sign = 1.0;
    if (layout_.sign) {
      sign = *layout_.sign;
    } else {
      const auto found = as_number(find(frames_.id(), {"sign"}), "sign");
      if (!found) return failure(found);
      sign = found->value_or(1.0);
    }
    if (sign != 1.0 && sign != -1.0) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("the attribute 'sign' is {}; it is 1 or -1", sign));
    }
    found_.map.sign = static_cast<int>(sign);
    return {};
  }

  /// Our own names first, then those of the Climate and Forecast conventions (8.1 "Packed Data", 2.5.1
  /// "Missing Data"), which many writers of NetCDF-4 follow.
  Expected<void> read_scale() {
    FrameMap& map = found_.map;
    const auto scale = as_number(find(frames_.id(), {"scale", "scale_factor"}), "scale");
    if (!scale) return failure(scale);
    const auto offset = as_number(find(frames_.id(), {"offset", "add_offset"}), "offset");
    if (!offset) return failure(offset);
    const auto missing = as_number(find(frames_.id(), {"_FillValue", "missing_value"}), "_FillValue");
    if (!missing) return failure(missing);
    const bool is_overridden = layout_.scale != 1.0 || layout_.offset != 0.0;
    map.scale = is_overridden ? layout_.scale : scale->value_or(1.0);
    map.offset = is_overridden ? layout_.offset : offset->value_or(0.0);
    map.missing = *missing;
    return {};
  }

  // Conditions.

  Expected<void> read_conditions() {
    Conditions& c = found_.conditions;
    for (const auto& [name, text] : {std::pair{"campaign", &c.campaign}, std::pair{"run", &c.run},
                                     std::pair{"source", &c.source}, std::pair{"note", &c.note}}) {
      auto found = as_text(find(name));
      if (!found) return failure(found);
      *text = std::move(*found);
    }
    for (const auto& [name, value] :
         {std::pair{"azimuth_deg", &c.azimuth_deg}, std::pair{"elevation_deg", &c.elevation_deg},
          std::pair{"aperture_diameter_m", &c.aperture_diameter_m},
          std::pair{"reference_length_m", &c.reference_length_m}, std::pair{"mach", &c.mach},
          std::pair{"velocity_m_s", &c.velocity_m_s}, std::pair{"density_kg_m3", &c.density_kg_m3},
          std::pair{"temperature_k", &c.temperature_k}, std::pair{"wavelength_m", &c.wavelength_m},
          std::pair{"gladstone_dale_m3_kg", &c.gladstone_dale_m3_kg}}) {
      const auto found = as_number(find(name), name);
      if (!found) return failure(found);
      *value = *found;
    }
    return {};
  }

  // Times.

  Expected<void> read_times() {
    const auto rate = as_number(find("frame_rate_hz"), "frame_rate_hz");
    if (!rate) return failure(rate);
    if (*rate && **rate <= 0.0) {
      return failure(ErrorCode::layout_mismatch, fmt::format("the attribute 'frame_rate_hz' is {}", **rate));
    }
    found_.frame_rate_hz = rate->value_or(0.0);
    const auto dataset = find_dataset(file_, layout_.time);
    if (!dataset) return failure(dataset);
    if (*dataset) return read_time_stamps((*dataset)->id());
    if (!*rate) {
      return failure(
          ErrorCode::layout_mismatch,
          fmt::format("there is neither a dataset '{}' nor an attribute 'frame_rate_hz'", layout_.time));
    }
    return {};
  }

  Expected<void> read_time_stamps(hid_t dataset) {
    if (auto matched = match(dataset, layout_.time, {found_.map.frames()}, "one time stamp a frame");
        !matched) {
      return matched;
    }
    if (found_.map.frames() > limits::time_stamps) {
      return failure(ErrorCode::too_large,
                     fmt::format("{} time stamps; at most {} are read, more need the attribute "
                                 "'frame_rate_hz' instead",
                                 found_.map.frames(), limits::time_stamps));
    }
    const auto unit = unit_of(dataset, layout_.time, times);
    if (!unit) return failure(unit);
    auto stamps = numbers<double>(file_.source, dataset, layout_.time, found_.map.frames());
    if (!stamps) return failure(stamps);
    for (double& stamp : *stamps) stamp *= unit->value_or(1.0);
    found_.time_s = std::move(*stamps);
    return found_.frame_rate_hz > 0.0 ? Expected<void>{} : rate_from_steps();
  }

  Expected<void> rate_from_steps() {
    const std::vector<double>& stamps = found_.time_s;
    if (stamps.size() < 2) return {};
    std::vector<double> steps(stamps.size() - 1);
    for (std::size_t i = 0; i < steps.size(); ++i) {
      steps[i] = stamps[i + 1] - stamps[i];
      // Said here with the frame's number, and because no order holds for NaN.
      if (!std::isfinite(steps[i]) || steps[i] < 0.0) {
        return failure(ErrorCode::layout_mismatch, fmt::format("time goes from {} s to {} s at frame {}",
                                                               stamps[i], stamps[i + 1], i + 1));
      }
    }
    const auto middle = steps.begin() + static_cast<std::ptrdiff_t>(steps.size() / 2);
    std::nth_element(steps.begin(), middle, steps.end());
    if (*middle <= 0.0) {
      return failure(
          ErrorCode::layout_mismatch,
          fmt::format("'{}' stands still: most frames have the time of the one before", layout_.time));
    }
    found_.frame_rate_hz = 1.0 / *middle;
    return {};
  }

  Expected<void> match(hid_t dataset,
                       const std::string& path,
                       const std::vector<std::uint64_t>& expected,
                       std::string_view what) const {
    const auto shape = shape_of(file_.source, dataset, path);
    if (!shape) return failure(shape);
    if (*shape == expected) return {};
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("'{}' has the shape {}, where {} ({}) is expected", path, shape_text(*shape),
                               what, shape_text(expected)));
  }

  // The grid.

  /// Stored in the order in which the frames' dataset has rows and columns.
  bool has_columns_first() const { return layout_.axes[2] < layout_.axes[1]; }

  Expected<void> read_mask() {
    optics::Grid& grid = found_.grid;
    grid.rows = static_cast<std::size_t>(found_.map.rows());
    grid.columns = static_cast<std::size_t>(found_.map.columns());
    grid.mask.assign(grid.rows * grid.columns, 1);
    const auto dataset = find_dataset(file_, layout_.mask);
    if (!dataset) return failure(dataset);
    if (!*dataset) return {};
    const std::vector<std::uint64_t> shape = has_columns_first()
                                                 ? std::vector<std::uint64_t>{grid.columns, grid.rows}
                                                 : std::vector<std::uint64_t>{grid.rows, grid.columns};
    if (auto matched = match((*dataset)->id(), layout_.mask, shape, "the frames' grid"); !matched)
      return matched;
    const auto values = numbers<std::int64_t>(file_.source, (*dataset)->id(), layout_.mask, grid.mask.size());
    if (!values) return failure(values);
    for (std::size_t row = 0; row < grid.rows; ++row) {
      for (std::size_t column = 0; column < grid.columns; ++column) {
        const std::size_t stored =
            has_columns_first() ? column * grid.rows + row : row * grid.columns + column;
        grid.mask[row * grid.columns + column] = (*values)[stored] != 0 ? 1 : 0;
      }
    }
    found_.has_mask = true;
    return {};
  }

  Expected<void> read_grid() {
    const auto x = find_dataset(file_, layout_.x);
    if (!x) return failure(x);
    const auto y = find_dataset(file_, layout_.y);
    if (!y) return failure(y);
    if (x->has_value() != y->has_value()) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("of the coordinates '{}' and '{}' only '{}' is there", layout_.x, layout_.y,
                                 *x ? layout_.x : layout_.y));
    }
    if (!*x) return grid_from_diameter();
    auto x_m = coordinates((*x)->id(), layout_.x, found_.map.columns(), "one a column");
    if (!x_m) return failure(x_m);
    auto y_m = coordinates((*y)->id(), layout_.y, found_.map.rows(), "one a row");
    if (!y_m) return failure(y_m);
    found_.grid.x_m = std::move(*x_m);
    found_.grid.y_m = std::move(*y_m);
    return {};
  }

  Expected<std::vector<double>> coordinates(hid_t dataset,
                                            const std::string& path,
                                            std::uint64_t count,
                                            std::string_view what) const {
    if (auto matched = match(dataset, path, {count}, what); !matched) return failure(matched);
    const auto unit = unit_of(dataset, path, lengths);
    if (!unit) return failure(unit);
    auto values = numbers<double>(file_.source, dataset, path, count);
    if (!values) return values;
    for (double& value : *values) value *= unit->value_or(1.0);
    return values;
  }

  /// Square cells, the diameter across the longer side, centered.
  Expected<void> grid_from_diameter() {
    const auto& diameter_m = found_.conditions.aperture_diameter_m;
    if (!diameter_m || *diameter_m <= 0.0) {
      return failure(
          ErrorCode::layout_mismatch,
          fmt::format("the size of the aperture is not known: there are neither coordinates '{}' and '{}' "
                      "nor a positive attribute 'aperture_diameter_m'",
                      layout_.x, layout_.y));
    }
    optics::Grid& grid = found_.grid;
    const double step_m = *diameter_m / static_cast<double>(std::max(grid.rows, grid.columns));
    const auto centered = [&](std::size_t count) {
      std::vector<double> values(count);
      for (std::size_t i = 0; i < count; ++i) {
        values[i] = (static_cast<double>(i) - static_cast<double>(count - 1) / 2.0) * step_m;
      }
      return values;
    };
    grid.x_m = centered(grid.columns);
    grid.y_m = centered(grid.rows);
    return {};
  }

  // Signals.

  Expected<void> read_signals() {
    const auto present = exists(file_, layout_.signals);
    if (!present) return failure(present);
    if (!*present) return {};
    const Handle group(H5Gopen2(file_.id(), layout_.signals.c_str(), H5P_DEFAULT), H5Gclose);
    if (!group) {
      H5Eclear2(H5E_DEFAULT);
      return failure(ErrorCode::layout_mismatch, fmt::format("'{}' is not a group", layout_.signals));
    }
    std::vector<std::string> names;
    const auto note = [](hid_t, const char* name, const H5L_info_t*, void* out) -> herr_t {
      auto& list = *static_cast<std::vector<std::string>*>(out);
      list.emplace_back(name);
      return list.size() > limits::signals ? 1 : 0;
    };
    const herr_t walked = H5Literate(group.id(), H5_INDEX_NAME, H5_ITER_INC, nullptr, note, &names);
    if (walked < 0) return library_failure(file_.source, fmt::format("listing '{}'", layout_.signals));
    if (walked > 0) {
      return failure(ErrorCode::too_large,
                     fmt::format("'{}' holds more than {} signals", layout_.signals, limits::signals));
    }
    for (const std::string& name : names) {
      if (auto read = read_signal(name); !read) return read;
    }
    return {};
  }

  /// What is no line of floats of the frames' length is something else's, and left alone.
  Expected<void> read_signal(const std::string& name) {
    const std::string path = layout_.signals + "/" + name;
    const auto dataset = find_dataset(file_, path);
    if (!dataset)
      return dataset.error().code == ErrorCode::layout_mismatch ? Expected<void>{} : failure(dataset);
    if (!*dataset) return {};
    const hid_t id = (*dataset)->id();
    const Handle type(H5Dget_type(id), H5Tclose);
    const auto shape = shape_of(file_.source, id, path);
    if (!shape) return failure(shape);
    if (H5Tget_class(type.id()) != H5T_FLOAT || *shape != std::vector<std::uint64_t>{found_.map.frames()})
      return {};
    signal_bytes_ += found_.map.frames() * sizeof(float);
    if (signal_bytes_ > limits::time_stamps * sizeof(double)) {
      return failure(ErrorCode::too_large,
                     fmt::format("the signals under '{}' have more values than are kept", layout_.signals));
    }
    auto values = numbers<float>(file_.source, id, path, found_.map.frames());
    if (!values) return failure(values);
    auto unit = as_text(find(id, {"unit", "units"}));
    if (!unit) return failure(unit);
    found_.signals.push_back(Signal{name, std::move(*unit), std::move(*values)});
    return {};
  }

  const OpenedFile& file_;
  const Layout& layout_;
  Handle root_, frames_;
  WavefrontFile found_;
  std::uint64_t signal_bytes_ = 0;
};

}  // namespace

Expected<WavefrontFile> read_structure(const OpenedFile& file, const Layout& layout) {
  return StructureReader(file, layout).run();
}

}  // namespace bentlight::probe
