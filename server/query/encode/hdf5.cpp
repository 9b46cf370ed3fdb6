// HDF5: everything. Arrays are datasets under /arrays with attribute `unit` and their axes as dimension
// scales; values are scalar datasets under /values with attributes `unit` and, where known, `low`, `high` and
// `level`. The root has attributes `analysis` and `subject`, and `warnings` and `provenance` as JSON text.
#include <algorithm>

#include "archive/hdf5_writer.h"
#include "base/text.h"
#include "query/encode/encoding.h"

namespace bentlight::query {

namespace {

using archive::Hdf5Writer;

/// Where an item lies. A slash would make groups, a lone dot would be the group itself.
std::string path_of(std::string_view group, std::string_view name) {
  std::string path = std::string(group) + "/";
  for (const char c : name) path += c == '/' || c == '\0' ? '_' : c;
  if (name.empty() || name == "." || name == "..") path += '_';
  return path;
}

Expected<void> write_value(Hdf5Writer& file, const Value& value) {
  const std::string path = path_of("/values", value.name);
  if (auto done = file.dataset<double>(path, {}, std::span(&value.value, 1)); !done) return done;
  if (auto done = file.attribute(path, "unit", value.unit.name); !done) return done;
  for (const auto& [name, number] :
       {std::pair("low", value.low), std::pair("high", value.high), std::pair("level", value.level)}) {
    if (!number) continue;
    if (auto done = file.attribute(path, name, *number); !done) return done;
  }
  return {};
}

Expected<void> write_array(Hdf5Writer& file, const Array& array) {
  const std::string path = path_of("/arrays", array.name);
  const std::vector<std::uint64_t> shape(array.shape.begin(), array.shape.end());
  const auto write = [&]<class Number>(const std::vector<Number>& data) {
    return file.dataset<Number>(path, shape, data);
  };
  if (auto done = std::visit(write, array.data); !done) return done;
  return file.attribute(path, "unit", array.unit.name);
}

/// Axes that the result holds become scales; others are only names and stay away. A scale has no scales
/// itself.
Expected<void> write_axes(Hdf5Writer& file, const Result& result, const Array& array) {
  if (is_axis(result, array)) return {};
  std::vector<std::string> scales(array.shape.size());
  for (std::size_t i = 0; i < std::min(scales.size(), array.axes.size()); ++i) {
    const Array* axis = result.array(array.axes[i]);
    const bool fits = axis != nullptr && axis != &array && axis->shape == std::vector{array.shape[i]};
    if (fits) scales[i] = path_of("/arrays", axis->name);
  }
  const bool has_scales =
      std::ranges::any_of(scales, [](const std::string& scale) { return !scale.empty(); });
  return has_scales ? file.axes(path_of("/arrays", array.name), scales) : Expected<void>{};
}

std::string json_text(const nlohmann::ordered_json& json) {
  return json.is_null() ? "{}" : json.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace);
}

Expected<void> write_root(Hdf5Writer& file, const Result& result) {
  auto warnings = nlohmann::ordered_json::array();
  for (const Warning& each : result.warnings) warnings.push_back({{"code", each.code}, {"text", each.text}});
  for (const auto& [name, text] :
       {std::pair("analysis", result.analysis), std::pair("subject", result.subject),
        std::pair("warnings", json_text(warnings)), std::pair("provenance", json_text(result.provenance))}) {
    if (auto done = file.attribute("/", name, text); !done) return done;
  }
  return {};
}

}  // namespace

Expected<std::string> encode_hdf5(const Result& result) {
  auto file = Hdf5Writer::in_memory();
  if (!file) return failure(file);
  if (auto done = write_root(*file, result); !done) return failure(done);
  for (const Value& value : result.values) {
    if (auto done = write_value(*file, value); !done) return failure(done);
  }
  for (const Array& array : result.arrays) {
    if (auto done = write_array(*file, array); !done) return failure(done);
  }
  for (const Array& array : result.arrays) {
    if (auto done = write_axes(*file, result, array); !done) return failure(done);
  }
  const auto image = file->image();
  if (!image) return failure(image);
  return std::string(reinterpret_cast<const char*>(image->data()), image->size());
}

}  // namespace bentlight::query
