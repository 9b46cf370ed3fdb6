#include "archive/structure_codec.h"

#include <fmt/format.h>

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <limits>
#include <utility>

namespace bentlight::archive {

// Arrays are copied as they lie in memory.
static_assert(std::endian::native == std::endian::little);

namespace {

using nlohmann::json;

template <class Element>
NamedArray named_array(std::string name,
                       std::string descr,
                       std::vector<std::size_t> shape,
                       const std::vector<Element>& values) {
  const auto bytes = std::as_bytes(std::span(values));
  return {std::move(name), std::move(descr), std::move(shape), {bytes.begin(), bytes.end()}};
}

const NamedArray* find(std::span<const NamedArray> arrays, std::string_view name) {
  const auto found = std::ranges::find(arrays, name, &NamedArray::name);
  return found == arrays.end() ? nullptr : &*found;
}

/// Thrown inside this file only, as the JSON library throws its own; put_together turns both into an Error.
struct Missing {
  std::string text;
};

template <class Element>
std::vector<Element> values(std::span<const NamedArray> arrays,
                            std::string_view name,
                            std::string_view descr) {
  const NamedArray* array = find(arrays, name);
  if (array == nullptr) throw Missing{fmt::format("array '{}' is missing", name)};
  std::size_t count = 1;
  for (const std::size_t extent : array->shape) {
    if (__builtin_mul_overflow(count, extent, &count)) count = std::numeric_limits<std::size_t>::max();
  }
  if (array->descr != descr || array->bytes.size() / sizeof(Element) != count ||
      array->bytes.size() % sizeof(Element) != 0) {
    throw Missing{fmt::format("array '{}' is not what its header says", name)};
  }
  std::vector<Element> out(count);
  if (count > 0) std::memcpy(out.data(), array->bytes.data(), array->bytes.size());
  return out;
}

// JSON has no NaN and no infinity; a fill value may be either.
json number(double value) {
  if (std::isnan(value)) return "nan";
  if (std::isinf(value)) return value > 0 ? "inf" : "-inf";
  return value;
}

double number(const json& value) {
  if (value.is_string()) {
    if (value == "nan") return std::numeric_limits<double>::quiet_NaN();
    if (value == "inf") return std::numeric_limits<double>::infinity();
    if (value == "-inf") return -std::numeric_limits<double>::infinity();
  }
  return value.get<double>();
}

json optional_number(const std::optional<double>& value) {
  return value ? number(*value) : json(nullptr);
}
std::optional<double> optional_number(const json& value) {
  return value.is_null() ? std::optional<double>() : number(value);
}

template <class Enumeration>
struct Word {
  Enumeration value;
  const char* word;
};

constexpr Word<ElementType> element_words[] = {{ElementType::float32, "float32"},
                                               {ElementType::float64, "float64"},
                                               {ElementType::int16, "int16"},
                                               {ElementType::int32, "int32"}};
constexpr Word<Storage> storage_words[] = {{Storage::contiguous, "contiguous"},
                                           {Storage::chunked, "chunked"}};
constexpr Word<Filter> filter_words[] = {
    {Filter::deflate, "deflate"}, {Filter::shuffle, "shuffle"}, {Filter::fletcher32, "fletcher32"}};

template <class Enumeration, std::size_t count>
std::string word_of(const Word<Enumeration> (&words)[count], Enumeration value) {
  return std::ranges::find(words, value, &Word<Enumeration>::value)->word;
}

template <class Enumeration, std::size_t count>
Enumeration of_word(const Word<Enumeration> (&words)[count], const std::string& word) {
  for (const auto& known : words) {
    if (known.word == word) return known.value;
  }
  throw Missing{fmt::format("'{}' is no known word", word)};
}

json facts_of(const FrameMap& map) {
  json filters = json::array();
  for (const Filter filter : map.filters) filters.push_back(word_of(filter_words, filter));
  return {{"shape", map.shape},
          {"axes", map.axes},
          {"element", word_of(element_words, map.element)},
          {"big_endian", map.big_endian},
          {"scale", number(map.scale)},
          {"offset", number(map.offset)},
          {"metres_per_unit", number(map.metres_per_unit)},
          {"sign", map.sign},
          {"missing", optional_number(map.missing)},
          {"storage", word_of(storage_words, map.storage)},
          {"data_offset", map.data_offset},
          {"chunk_shape", map.chunk_shape},
          {"filters", filters},
          {"fill_value", number(map.fill_value)}};
}

FrameMap map_of(const json& facts, std::span<const NamedArray> arrays) {
  FrameMap map;
  map.shape = facts.at("shape").get<std::array<std::uint64_t, 3>>();
  map.axes = facts.at("axes").get<std::array<int, 3>>();
  map.element = of_word(element_words, facts.at("element").get<std::string>());
  map.big_endian = facts.at("big_endian").get<bool>();
  map.scale = number(facts.at("scale"));
  map.offset = number(facts.at("offset"));
  map.metres_per_unit = number(facts.at("metres_per_unit"));
  map.sign = facts.at("sign").get<int>();
  map.missing = optional_number(facts.at("missing"));
  map.storage = of_word(storage_words, facts.at("storage").get<std::string>());
  map.data_offset = facts.at("data_offset").get<std::uint64_t>();
  map.chunk_shape = facts.at("chunk_shape").get<std::array<std::uint64_t, 3>>();
  for (const auto& word : facts.at("filters"))
    map.filters.push_back(of_word(filter_words, word.get<std::string>()));
  map.fill_value = number(facts.at("fill_value"));
  if (map.storage == Storage::chunked) {
    const auto table = values<std::uint64_t>(arrays, "chunks", "<u8");
    map.chunks.reserve(table.size() / 2);
    for (std::size_t i = 0; i + 1 < table.size(); i += 2) {
      map.chunks.push_back({.offset = table[i],
                            .bytes = static_cast<std::uint32_t>(table[i + 1]),
                            .filter_mask = static_cast<std::uint32_t>(table[i + 1] >> 32)});
    }
  }
  return map;
}

NamedArray chunk_table(const std::vector<Chunk>& chunks) {
  std::vector<std::uint64_t> table;
  table.reserve(chunks.size() * 2);
  for (const Chunk& chunk : chunks) {
    table.push_back(chunk.offset);
    table.push_back(chunk.bytes | std::uint64_t{chunk.filter_mask} << 32);
  }
  return named_array("chunks", "<u8", {chunks.size(), 2}, table);
}

/// Every condition beside its name, so that both directions walk one list.
template <class Conditions, class Text, class Number>
void walk(Conditions& conditions, const Text& text, const Number& value) {
  text("campaign", conditions.campaign);
  text("run", conditions.run);
  text("source", conditions.source);
  text("note", conditions.note);
  value("azimuth_deg", conditions.azimuth_deg);
  value("elevation_deg", conditions.elevation_deg);
  value("aperture_diameter_m", conditions.aperture_diameter_m);
  value("reference_length_m", conditions.reference_length_m);
  value("mach", conditions.mach);
  value("velocity_m_s", conditions.velocity_m_s);
  value("density_kg_m3", conditions.density_kg_m3);
  value("temperature_k", conditions.temperature_k);
  value("wavelength_m", conditions.wavelength_m);
  value("gladstone_dale_m3_kg", conditions.gladstone_dale_m3_kg);
}

json facts_of(const Conditions& conditions) {
  json facts;
  walk(
      conditions, [&](const char* name, const std::string& text) { facts[name] = text; },
      [&](const char* name, const std::optional<double>& value) { facts[name] = optional_number(value); });
  return facts;
}

Conditions conditions_of(const json& facts) {
  Conditions conditions;
  walk(
      conditions, [&](const char* name, std::string& text) { text = facts.at(name).get<std::string>(); },
      [&](const char* name, std::optional<double>& value) { value = optional_number(facts.at(name)); });
  return conditions;
}

std::vector<Signal> signals_of(const json& facts, std::span<const NamedArray> arrays) {
  std::vector<Signal> signals;
  if (facts.empty()) return signals;
  const auto all = values<float>(arrays, "signals", "<f4");
  const std::size_t frames = all.size() / facts.size();
  for (std::size_t i = 0; i < facts.size(); ++i) {
    const auto first = all.begin() + static_cast<std::ptrdiff_t>(i * frames);
    signals.push_back({.name = facts[i].at("name").get<std::string>(),
                       .unit = facts[i].at("unit").get<std::string>(),
                       .values = {first, first + static_cast<std::ptrdiff_t>(frames)}});
  }
  return signals;
}

WavefrontFile assembled(const json& facts, std::span<const NamedArray> arrays) {
  WavefrontFile file;
  const json& identity = facts.at("identity");
  file.identity.stamp = {.size_bytes = identity.at("size_bytes").get<std::uint64_t>(),
                         .mtime_ns = identity.at("mtime_ns").get<std::int64_t>(),
                         .inode = identity.at("inode").get<std::uint64_t>()};
  file.identity.metadata_digest = identity.at("metadata_digest").get<std::string>();
  file.dataset = facts.at("dataset").get<std::string>();
  file.map = map_of(facts.at("map"), arrays);
  file.grid.rows = static_cast<std::size_t>(file.map.rows());
  file.grid.columns = static_cast<std::size_t>(file.map.columns());
  file.grid.x_m = values<double>(arrays, "x", "<f8");
  file.grid.y_m = values<double>(arrays, "y", "<f8");
  file.grid.mask = values<std::uint8_t>(arrays, "mask", "|u1");
  file.has_mask = facts.at("has_mask").get<bool>();
  if (facts.at("has_time").get<bool>()) file.time_s = values<double>(arrays, "time", "<f8");
  file.frame_rate_hz = number(facts.at("frame_rate_hz"));
  file.conditions = conditions_of(facts.at("conditions"));
  file.signals = signals_of(facts.at("signals"), arrays);
  return file;
}

/// A JSON exception or a missing part, as an Error.
template <class Make>
auto guarded(const Make& make) -> Expected<decltype(make())> {
  try {
    return make();
  } catch (const json::exception& fault) {
    return failure(ErrorCode::damaged_state, fault.what());
  } catch (const Missing& fault) {
    return failure(ErrorCode::damaged_state, fault.text);
  }
}

}  // namespace

TakenApart take_apart(const WavefrontFile& file) {
  const FileStamp& stamp = file.identity.stamp;
  TakenApart parts;
  parts.facts = {{"identity",
                  {{"size_bytes", stamp.size_bytes},
                   {"mtime_ns", stamp.mtime_ns},
                   {"inode", stamp.inode},
                   {"metadata_digest", file.identity.metadata_digest}}},
                 {"dataset", file.dataset},
                 {"map", facts_of(file.map)},
                 {"has_mask", file.has_mask},
                 {"has_time", !file.time_s.empty()},
                 {"frame_rate_hz", number(file.frame_rate_hz)},
                 {"conditions", facts_of(file.conditions)},
                 {"signals", json::array()}};
  const optics::Grid& grid = file.grid;
  parts.arrays.push_back(named_array("x", "<f8", {grid.x_m.size()}, grid.x_m));
  parts.arrays.push_back(named_array("y", "<f8", {grid.y_m.size()}, grid.y_m));
  parts.arrays.push_back(named_array("mask", "|u1", {grid.rows, grid.columns}, grid.mask));
  if (!file.time_s.empty())
    parts.arrays.push_back(named_array("time", "<f8", {file.time_s.size()}, file.time_s));
  if (file.map.storage == Storage::chunked) parts.arrays.push_back(chunk_table(file.map.chunks));
  if (!file.signals.empty()) {
    std::vector<float> all;
    for (const Signal& signal : file.signals) {
      parts.facts["signals"].push_back({{"name", signal.name}, {"unit", signal.unit}});
      all.insert(all.end(), signal.values.begin(), signal.values.end());
    }
    parts.arrays.push_back(
        named_array("signals", "<f4", {file.signals.size(), file.signals.front().values.size()}, all));
  }
  return parts;
}

Expected<WavefrontFile> put_together(const json& facts, std::span<const NamedArray> arrays) {
  return guarded([&] { return assembled(facts, arrays); });
}

json to_json(const Layout& layout) {
  return {{"dataset", layout.dataset},
          {"axes", layout.axes},
          {"unit", layout.unit ? json(*layout.unit) : json(nullptr)},
          {"scale", layout.scale},
          {"offset", layout.offset},
          {"sign", layout.sign ? json(*layout.sign) : json(nullptr)},
          {"time", layout.time},
          {"mask", layout.mask},
          {"x", layout.x},
          {"y", layout.y},
          {"signals", layout.signals}};
}

Expected<Layout> layout_from_json(const json& json) {
  return guarded([&] {
    Layout layout;
    layout.dataset = json.at("dataset").get<std::string>();
    layout.axes = json.at("axes").get<std::array<int, 3>>();
    if (!json.at("unit").is_null()) layout.unit = json.at("unit").get<std::string>();
    layout.scale = json.at("scale").get<double>();
    layout.offset = json.at("offset").get<double>();
    if (!json.at("sign").is_null()) layout.sign = json.at("sign").get<int>();
    layout.time = json.at("time").get<std::string>();
    layout.mask = json.at("mask").get<std::string>();
    layout.x = json.at("x").get<std::string>();
    layout.y = json.at("y").get<std::string>();
    layout.signals = json.at("signals").get<std::string>();
    return layout;
  });
}

}  // namespace bentlight::archive
