#include "query/encode/encoding.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <optional>
#include <stdexcept>
#include <vector>

#include "base/text.h"

namespace bentlight::query {

namespace {

constexpr std::array encodings = {Encoding::json, Encoding::csv, Encoding::npy, Encoding::hdf5};

// The longest texts of std::to_chars, with the separator: -2.2250738585072014e-308 and -1.17549435e-38.
constexpr std::size_t double_text_bytes = 25;
constexpr std::size_t float_text_bytes = 16;

std::vector<std::string> media_types() {
  std::vector<std::string> types;
  for (const Encoding encoding : encodings) types.emplace_back(media_type(encoding));
  return types;
}

std::string_view trimmed(std::string_view text) {
  constexpr std::string_view blanks = " \t";
  const auto first = text.find_first_not_of(blanks);
  if (first == std::string_view::npos) return {};
  return text.substr(first, text.find_last_not_of(blanks) - first + 1);
}

std::string lower(std::string_view text) {
  std::string out(text);
  for (char& c : out) {
    if (c >= 'A' && c <= 'Z') c = static_cast<char>(c - 'A' + 'a');
  }
  return out;
}

/// One media range of an Accept field.
struct MediaRange {
  std::string type, subtype;  // "*" for any
  double quality = 1.0;

  /// How precisely it means `media_type`: 0 not at all, 3 by its full name.
  int precision(std::string_view media_type) const {
    const auto slash = media_type.find('/');
    if (type == "*") return 1;
    if (type != media_type.substr(0, slash)) return 0;
    if (subtype == "*") return 2;
    return subtype == media_type.substr(slash + 1) ? 3 : 0;
  }
};

std::optional<MediaRange> parse_media_range(std::string_view text) {
  const auto parts = split(text, ';');
  const std::string name = lower(trimmed(parts.front()));
  const auto slash = name.find('/');
  if (slash == std::string::npos || slash == 0 || slash + 1 == name.size()) return std::nullopt;
  MediaRange range{.type = name.substr(0, slash), .subtype = name.substr(slash + 1)};
  if (range.type == "*" && range.subtype != "*") return std::nullopt;
  for (std::size_t i = 1; i < parts.size(); ++i) {
    const std::string parameter = lower(trimmed(parts[i]));
    if (!parameter.starts_with("q=")) continue;  // charset and the like do not change what we have to offer
    const auto quality = parse_number(std::string_view(parameter).substr(2));
    if (!quality || *quality < 0.0 || *quality > 1.0) return std::nullopt;
    range.quality = *quality;
  }
  return range;
}

double quality_of(Encoding encoding, const std::vector<MediaRange>& ranges) {
  int best = 0;
  double quality = 0.0;
  for (const MediaRange& range : ranges) {
    const int precision = range.precision(media_type(encoding));
    if (precision > best || (precision == best && precision > 0 && range.quality > quality)) {
      best = precision;
      quality = range.quality;
    }
  }
  return quality;
}

/// Whether an array's numbers go into the reply.
bool is_encoded(const Array& array, Encoding encoding, const EncodeOptions& options) {
  if (!options.array.empty()) return array.name == options.array;
  return encoding != Encoding::csv || array.shape.size() <= 1;
}

std::size_t bytes_at_most(const Array& array, Encoding encoding) {
  const bool is_float = std::holds_alternative<std::vector<float>>(array.data);
  const bool is_text = encoding == Encoding::json || encoding == Encoding::csv;
  const std::size_t each = is_text ? (is_float ? float_text_bytes : double_text_bytes)
                                   : (is_float ? sizeof(float) : sizeof(double));
  return element_count(array) * each;
}

Expected<void> check_size(const Result& result, Encoding encoding, const EncodeOptions& options) {
  std::size_t bytes = 0;
  for (const Array& array : result.arrays) {
    if (is_encoded(array, encoding, options)) bytes += bytes_at_most(array, encoding);
  }
  if (bytes <= options.limit_bytes) return {};
  return failure(ErrorCode::too_large,
                 fmt::format("as {} this result may take {} bytes, more than the {} of one reply; ask for a "
                             "shorter window, or for one array as npy",
                             name(encoding), bytes, options.limit_bytes),
                 "format");
}

Expected<std::string> encoded_bytes(const Result& result, Encoding encoding, const std::string& array) {
  switch (encoding) {
    case Encoding::json:
      return encode_json(result);
    case Encoding::csv:
      return encode_csv(result, array);
    case Encoding::npy:
      return encode_npy(result, array);
    case Encoding::hdf5:
      return encode_hdf5(result);
  }
  throw std::logic_error("encode: an encoding without an encoder");
}

}  // namespace

std::span<const Encoding> all_encodings() {
  return encodings;
}

std::string_view name(Encoding encoding) {
  switch (encoding) {
    case Encoding::json:
      return "json";
    case Encoding::csv:
      return "csv";
    case Encoding::npy:
      return "npy";
    case Encoding::hdf5:
      return "hdf5";
  }
  throw std::logic_error("name: an encoding without a name");
}

std::string_view media_type(Encoding encoding) {
  switch (encoding) {
    case Encoding::json:
      return "application/json";
    case Encoding::csv:
      return "text/csv";
    case Encoding::npy:
      return "application/x-npy";
    case Encoding::hdf5:
      return "application/x-hdf5";
  }
  throw std::logic_error("media_type: an encoding without a type");
}

Expected<Encoding> parse_encoding(std::string_view text) {
  std::vector<std::string> names;
  for (const Encoding encoding : encodings) {
    if (name(encoding) == text) return encoding;
    names.emplace_back(name(encoding));
  }
  return failure(ErrorCode::unsupported_encoding,
                 fmt::format("results are not given as {}; choose one of {}", text, fmt::join(names, ", ")),
                 "format", names);
}

Expected<Encoding> negotiated_encoding(std::string_view accept) {
  std::vector<MediaRange> ranges;
  for (const std::string& part : split(accept, ',')) {
    if (auto range = parse_media_range(part)) ranges.push_back(std::move(*range));
  }
  if (ranges.empty()) return Encoding::json;
  const auto best =
      std::ranges::max_element(encodings, {}, [&](Encoding each) { return quality_of(each, ranges); });
  if (quality_of(*best, ranges) > 0.0) return *best;
  return failure(ErrorCode::unsupported_encoding, fmt::format("nothing on offer matches Accept: {}", accept),
                 "accept", media_types());
}

Expected<Encoded> encode(const Result& result, Encoding encoding, const EncodeOptions& options) {
  const bool takes_array = encoding == Encoding::csv || encoding == Encoding::npy;
  if (!takes_array && !options.array.empty()) {
    return failure(
        ErrorCode::bad_parameter,
        fmt::format("array={} goes with csv and npy; {} holds every array", options.array, name(encoding)),
        "array");
  }
  if (const auto fits = check_size(result, encoding, options); !fits) return failure(fits);
  auto bytes = encoded_bytes(result, encoding, options.array);
  if (!bytes) return failure(bytes);
  std::string content_type(media_type(encoding));
  if (encoding == Encoding::csv) content_type += "; charset=utf-8";
  return Encoded{.content_type = std::move(content_type),
                 .file_suffix = encoding == Encoding::hdf5 ? "h5" : std::string(name(encoding)),
                 .bytes = std::make_shared<const std::string>(std::move(*bytes))};
}

bool is_axis(const Result& result, const Array& array) {
  return std::ranges::any_of(result.arrays, [&](const Array& each) {
    return &each != &array && std::ranges::find(each.axes, array.name) != each.axes.end();
  });
}

std::size_t element_count(const Array& array) {
  return std::visit([](const auto& data) { return data.size(); }, array.data);
}

tl::unexpected<Error> no_such_array(const Result& result, const std::string& name) {
  std::vector<std::string> names;
  for (const Array& array : result.arrays) names.push_back(array.name);
  return failure(ErrorCode::bad_parameter,
                 fmt::format("this result has no array {}; it has {}", name,
                             names.empty() ? "none" : fmt::format("{}", fmt::join(names, ", "))),
                 "array", names);
}

}  // namespace bentlight::query
