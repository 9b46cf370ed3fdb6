// Results to encode, and what Python makes of the encodings.
#pragma once

#include <fmt/format.h>

#include <cmath>
#include <cstdint>
#include <filesystem>
#include <fstream>
#include <limits>
#include <random>
#include <stdexcept>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "query/result.h"
#include "support/command.h"
#include "support/temporary_folder.h"

namespace bentlight::test {

/// An array in one line; as an aggregate in place g++ 12 warns of members that it takes for uninitialized.
inline query::Array array_of(std::string name,
                             std::vector<std::size_t> shape,
                             query::Unit unit,
                             std::vector<std::string> axes,
                             decltype(query::Array::data) data) {
  query::Array array;
  array.name = std::move(name);
  array.shape = std::move(shape);
  array.unit = std::move(unit);
  array.axes = std::move(axes);
  array.data = std::move(data);
  return array;
}

/// A small result of every feature: intervals, two axes, a matrix of floats, a warning, provenance.
inline query::Result small_result() {
  return {
      .analysis = "statistics",
      .subject = "wall-dome-az90",
      .values =
          {{.name = "opd_rms_mean", .value = 0.25, .unit = {"um", 1}, .low = 0.2, .high = 0.3, .level = 0.95},
           {.name = "frames", .value = 3, .unit = {"1", 0}}},
      .arrays = {array_of("time", {3}, {"s", 0}, {"time"}, std::vector{0.0, 0.5, 1.0}),
                 array_of("mean", {3}, {"um", 1}, {"time"}, std::vector{0.1, -2.0, 3e-7}),
                 array_of("x", {2}, {"m", 0}, {"x"}, std::vector{-0.05, 0.05}),
                 array_of("y", {3}, {"m", 0}, {"y"}, std::vector{-0.1, 0.0, 0.1}),
                 array_of("rms_map", {3, 2}, {"um", 1}, {"y", "x"},
                          std::vector{0.1F, 0.2F, 0.3F, 0.4F, 0.5F, 0.6F})},
      .warnings = {{.code = "short-window", .text = "3 frames, \"few\""}},
      .provenance = {{"digest", "0123abcd"}, {"preparation", {{"remove", "piston,tilt"}, {"first", 0}}}}};
}

/// Numbers of every size a double has, and all that are special, by a fixed seed.
template <class Number>
std::vector<Number> any_numbers(std::size_t count, std::uint64_t seed) {
  using Limits = std::numeric_limits<Number>;
  std::vector<Number> numbers = {Number{0},          -Number{0},          Limits::quiet_NaN(),
                                 Limits::infinity(), -Limits::infinity(), Limits::denorm_min(),
                                 Limits::min(),      Limits::max(),       Limits::lowest(),
                                 Limits::epsilon()};
  std::mt19937_64 random(seed);
  std::uniform_real_distribution<double> mantissa(-10.0, 10.0);
  std::uniform_int_distribution<int> exponent(Limits::min_exponent10 + 1, Limits::max_exponent10 - 1);
  while (numbers.size() < count) {
    numbers.push_back(static_cast<Number>(mantissa(random) * std::pow(10.0, exponent(random) - 1)));
  }
  numbers.resize(count);
  return numbers;
}

/// A text of letters, quotes, separators, control characters and other alphabets.
inline std::string any_text(std::mt19937_64& random) {
  static const std::vector<std::string> pieces = {"a",  "B",  " ",    "\"", "\\", ",", ";",  "\n",
                                                  "\r", "\t", "#",    "=",  "µ",  "λ", "光", "🔭",
                                                  "'",  "/",  "\x01", "0",  "{",  "]"};
  std::string text;
  const std::size_t length = std::uniform_int_distribution<std::size_t>(1, 8)(random);
  for (std::size_t i = 0; i < length; ++i) {
    text += pieces[std::uniform_int_distribution<std::size_t>(0, pieces.size() - 1)(random)];
  }
  return text;
}

/// A result of any shape, by a fixed seed; names are unique.
inline query::Result any_result(std::uint64_t seed) {
  std::mt19937_64 random(seed);
  const auto below = [&](std::size_t count) {
    return std::uniform_int_distribution<std::size_t>(0, count - 1)(random);
  };
  query::Result result{
      .analysis = any_text(random),
      .subject = any_text(random),
      .values = {},
      .arrays = {},
      .warnings = {},
      .provenance = {{any_text(random), any_text(random)}, {"nested", {{"n", below(1000)}, {"x", 0.1}}}}};
  const auto numbers = any_numbers<double>(64, seed);
  for (std::size_t i = below(5); i-- > 0;) {
    query::Value value{.name = fmt::format("v{}{}", i, any_text(random)),
                       .value = numbers[below(64)],
                       .unit = {any_text(random), 1}};
    if (below(2) == 0) value.low = numbers[below(64)];
    if (below(2) == 0) value.high = numbers[below(64)];
    if (below(2) == 0) value.level = 0.95;
    result.values.push_back(std::move(value));
  }
  for (std::size_t i = below(5); i-- > 0;) {
    query::Array array =
        array_of(fmt::format("a{}{}", i, any_text(random)), {}, {any_text(random), 0}, {}, {});
    std::size_t count = 1;
    for (std::size_t dimension = below(4); dimension-- > 0;) {
      array.shape.push_back(below(5));
      array.axes.push_back(any_text(random));
      count *= array.shape.back();
    }
    if (below(2) == 0) {
      array.data = any_numbers<float>(count, seed + i);
    } else {
      array.data = any_numbers<double>(count, seed + i);
    }
    result.arrays.push_back(std::move(array));
  }
  for (std::size_t i = below(3); i-- > 0;) result.warnings.push_back({any_text(random), any_text(random)});
  return result;
}

/// What some lines of Python print that find `bytes` in a file at sys.argv[1].
inline std::string python(std::string_view lines, std::string_view bytes) {
  const TemporaryFolder folder;
  const auto script = folder.path() / "read.py", file = folder.path() / "bytes";
  std::ofstream(script, std::ios::binary) << lines;
  std::ofstream(file, std::ios::binary) << bytes;
  const auto finished =
      testing_support::run(fmt::format("/usr/bin/python3 '{}' '{}'", script.string(), file.string()));
  return finished.status == 0 ? finished.output : "[failed] " + finished.output;
}

/// The bits of numbers, as Python's float.hex would need several lines to say.
template <class Number>
std::string_view bits_of(const std::vector<Number>& numbers) {
  return {reinterpret_cast<const char*>(numbers.data()), numbers.size() * sizeof(Number)};
}

}  // namespace bentlight::test
