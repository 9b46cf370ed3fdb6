#include "query/result_codec.h"

#include <algorithm>
#include <array>
#include <bit>
#include <cstdint>
#include <cstring>
#include <limits>
#include <optional>
#include <stdexcept>
#include <string>
#include <utility>

#include "base/digest.h"

namespace bentlight::query {

namespace {

using nlohmann::ordered_json;

static_assert(std::endian::native == std::endian::little, "numbers are stored as they lie in memory");

constexpr std::string_view magic = "BNTLRES1";
constexpr std::size_t preamble_bytes = 32;
constexpr std::size_t alignment = 8;
constexpr std::size_t numbers_per_value = 4;  // value, low, high, level

// Deeper than any provenance; the JSON library writes nested values by recursion, and the stack is not
// endless.
constexpr std::size_t head_depth = 64;

tl::unexpected<Error> damaged(std::string_view what) {
  return failure(ErrorCode::damaged_state, "the kept result is damaged: " + std::string(what));
}

std::size_t padded(std::size_t bytes) {
  return (bytes + alignment - 1) / alignment * alignment;
}

void append(std::vector<std::byte>& out, std::span<const std::byte> bytes) {
  out.insert(out.end(), bytes.begin(), bytes.end());
}

void append(std::vector<std::byte>& out, double number) {
  append(out, std::as_bytes(std::span(&number, 1)));
}

std::uint64_t whole_number_at(std::span<const std::byte> bytes, std::size_t offset) {
  std::uint64_t number = 0;
  std::memcpy(&number, bytes.data() + offset, sizeof(number));
  return number;
}

// ---- Writing

ordered_json head_of(const Value& value) {
  return {{"name", value.name},
          {"unit", value.unit.name},
          {"opd_power", value.unit.opd_power},
          {"has", {value.low.has_value(), value.high.has_value(), value.level.has_value()}}};
}

ordered_json head_of(const Array& array) {
  const bool is_float = std::holds_alternative<std::vector<float>>(array.data);
  return {{"name", array.name},   {"unit", array.unit.name}, {"opd_power", array.unit.opd_power},
          {"shape", array.shape}, {"axes", array.axes},      {"element", is_float ? "f4" : "f8"}};
}

ordered_json head_of(const Result& result) {
  ordered_json head = {{"analysis", result.analysis},       {"subject", result.subject},
                       {"values", ordered_json::array()},   {"arrays", ordered_json::array()},
                       {"warnings", ordered_json::array()}, {"provenance", result.provenance}};
  for (const Value& value : result.values) head["values"].push_back(head_of(value));
  for (const Array& array : result.arrays) head["arrays"].push_back(head_of(array));
  for (const Warning& warning : result.warnings) {
    head["warnings"].push_back(ordered_json{{"code", warning.code}, {"text", warning.text}});
  }
  return head;
}

std::vector<std::byte> numbers_of(const Result& result) {
  std::vector<std::byte> numbers;
  for (const Value& value : result.values) {
    append(numbers, value.value);
    append(numbers, value.low.value_or(0.0));
    append(numbers, value.high.value_or(0.0));
    append(numbers, value.level.value_or(0.0));
  }
  for (const Array& array : result.arrays) {
    std::size_t count = 1;
    for (const std::size_t extent : array.shape) count *= extent;
    std::visit(
        [&](const auto& data) {
          if (data.size() != count)
            throw std::invalid_argument("encode_result: " + array.name + " does not fill its shape");
          append(numbers, std::as_bytes(std::span(data)));
        },
        array.data);
    numbers.resize(padded(numbers.size()));
  }
  return numbers;
}

// ---- Reading

/// Takes numbers off the front of what is there, and never more than that.
class NumberReader {
 public:
  explicit NumberReader(std::span<const std::byte> bytes) : bytes_(bytes) {}

  template <class Number>
  std::optional<std::vector<Number>> take(std::size_t count) {
    if (count > bytes_.size() / sizeof(Number)) return std::nullopt;
    std::vector<Number> numbers(count);
    if (count > 0) std::memcpy(numbers.data(), bytes_.data(), count * sizeof(Number));
    bytes_ = bytes_.subspan(std::min(bytes_.size(), padded(count * sizeof(Number))));
    return numbers;
  }

  bool is_empty() const { return bytes_.empty(); }

 private:
  std::span<const std::byte> bytes_;
};

/// Whether brackets nest no deeper than `depth`. Looks past strings; whether it is JSON at all is not its
/// question.
bool nests_within(std::string_view text, std::size_t depth) {
  std::size_t open = 0;
  bool is_in_text = false;
  for (std::size_t i = 0; i < text.size(); ++i) {
    const char c = text[i];
    if (is_in_text) {
      if (c == '\\') ++i;
      if (c == '"') is_in_text = false;
    } else if (c == '"') {
      is_in_text = true;
    } else if (c == '[' || c == '{') {
      if (++open > depth) return false;
    } else if ((c == ']' || c == '}') && open > 0) {
      --open;
    }
  }
  return true;
}

/// The product of the extents, unless it is beyond any memory.
std::optional<std::size_t> element_count(const std::vector<std::size_t>& shape) {
  std::size_t count = 1;
  for (const std::size_t extent : shape) {
    if (extent != 0 && count > std::numeric_limits<std::size_t>::max() / extent) return std::nullopt;
    count *= extent;
  }
  return count;
}

template <class Number>
Expected<void> take_data(Array& array, std::size_t count, NumberReader& numbers) {
  auto data = numbers.take<Number>(count);
  if (!data) return damaged("an array is longer than the file");
  array.data = std::move(*data);
  return {};
}

// What the library throws for a missing member or another type is caught in decode_result(). Whole numbers
// are looked at first, for it would make one of 1e300 or of -1 without a word.

/// The items of a list; the library would walk over an object or a lone number just the same.
const ordered_json::array_t& list(const ordered_json& head, const char* name) {
  return head.at(name).get_ref<const ordered_json::array_t&>();
}

Expected<Unit> unit_from(const ordered_json& head) {
  constexpr int highest_power = 16;
  const auto& power = head.at("opd_power");
  if (!power.is_number_integer() || power < -highest_power || power > highest_power) {
    return damaged("a power of a unit is no small whole number");
  }
  return Unit{.name = head.at("unit"), .opd_power = power};
}

Expected<std::vector<std::size_t>> shape_from(const ordered_json& head) {
  std::vector<std::size_t> shape;
  for (const auto& extent : list(head, "shape")) {
    if (!extent.is_number_unsigned()) return damaged("an extent is no whole number");
    shape.push_back(extent);
  }
  return shape;
}

Expected<Value> value_from(const ordered_json& head, NumberReader& numbers) {
  const auto taken = numbers.take<double>(numbers_per_value);
  if (!taken) return damaged("there are fewer numbers than values");
  auto unit = unit_from(head);
  if (!unit) return failure(unit);
  const auto if_given = [&](std::size_t i) {
    return head.at("has").at(i - 1).get<bool>() ? std::optional((*taken)[i]) : std::nullopt;
  };
  return Value{.name = head.at("name"),
               .value = (*taken)[0],
               .unit = std::move(*unit),
               .low = if_given(1),
               .high = if_given(2),
               .level = if_given(3)};
}

Expected<Array> array_from(const ordered_json& head, NumberReader& numbers) {
  auto unit = unit_from(head);
  if (!unit) return failure(unit);
  auto shape = shape_from(head);
  if (!shape) return failure(shape);
  Array array{.name = head.at("name"),
              .shape = std::move(*shape),
              .unit = std::move(*unit),
              .axes = head.at("axes").get<std::vector<std::string>>(),
              .data = std::vector<double>()};
  const auto count = element_count(array.shape);
  if (!count) return damaged("a shape is beyond all measure");
  const std::string element = head.at("element");
  if (element != "f4" && element != "f8") return damaged("an element type is unknown");
  const auto taken =
      element == "f4" ? take_data<float>(array, *count, numbers) : take_data<double>(array, *count, numbers);
  if (!taken) return failure(taken);
  return array;
}

Expected<Result> result_from(const ordered_json& head, NumberReader numbers) {
  Result result{.analysis = head.at("analysis"),
                .subject = head.at("subject"),
                .values = {},
                .arrays = {},
                .warnings = {},
                .provenance = head.at("provenance")};
  for (const auto& each : list(head, "values")) {
    auto value = value_from(each, numbers);
    if (!value) return failure(value);
    result.values.push_back(std::move(*value));
  }
  for (const auto& each : list(head, "arrays")) {
    auto array = array_from(each, numbers);
    if (!array) return failure(array);
    result.arrays.push_back(std::move(*array));
  }
  for (const auto& each : list(head, "warnings"))
    result.warnings.push_back({each.at("code"), each.at("text")});
  if (!numbers.is_empty()) return damaged("there are more numbers than its head tells of");
  return result;
}

}  // namespace

std::vector<std::byte> sealed_result(std::string_view head, std::span<const std::byte> numbers) {
  const std::size_t head_bytes = padded(head.size());
  std::vector<std::byte> out(preamble_bytes + head_bytes, std::byte{' '});
  out.reserve(out.size() + numbers.size());
  std::memcpy(out.data() + preamble_bytes, head.data(), head.size());
  append(out, numbers);
  const std::array<std::uint64_t, 3> sizes_and_checksum = {head_bytes, numbers.size(),
                                                           checksum(std::span(out).subspan(preamble_bytes))};
  std::memcpy(out.data(), magic.data(), magic.size());
  std::memcpy(out.data() + magic.size(), sizes_and_checksum.data(), sizeof(sizes_and_checksum));
  return out;
}

std::vector<std::byte> encode_result(const Result& result) {
  const std::string head = head_of(result).dump(-1, ' ', false, ordered_json::error_handler_t::replace);
  return sealed_result(head, numbers_of(result));
}

Expected<Result> decode_result(std::span<const std::byte> bytes) {
  if (bytes.size() < preamble_bytes) return damaged("it is shorter than its preamble");
  if (std::memcmp(bytes.data(), magic.data(), magic.size()) != 0) return damaged("it is of another format");
  const std::uint64_t head_bytes = whole_number_at(bytes, 8), number_bytes = whole_number_at(bytes, 16);
  const auto body = bytes.subspan(preamble_bytes);
  if (head_bytes > body.size() || body.size() - head_bytes != number_bytes) return damaged("it is cut short");
  if (checksum(body) != whole_number_at(bytes, 24)) return damaged("its checksum is another");
  const std::string_view text(reinterpret_cast<const char*>(body.data()), head_bytes);
  if (!nests_within(text, head_depth)) return damaged("its head nests too deep");
  const auto head = ordered_json::parse(text, nullptr, /*allow_exceptions=*/false);
  if (!head.is_object()) return damaged("its head is not a JSON object");
  try {
    return result_from(head, NumberReader(body.subspan(head_bytes)));
  } catch (const ordered_json::exception& error) {
    return damaged(error.what());
  }
}

}  // namespace bentlight::query
