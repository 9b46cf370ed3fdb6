// A result: named values and arrays with units and axes, warnings, and where they came from. Every encoder, the cache,
// the command line and the page work on this shape alone.
#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include <nlohmann/json.hpp>

namespace bentlight::query {

/// What a unit conversion does to a number: how often it holds the optical path length.
struct Unit {
  std::string name;       // SI, "m", "m2/Hz", "1", "s", "rad"
  int opd_power = 0;      // 1 for an OPD, 2 for its variance, 0 for what length_unit does not touch
  bool operator==(const Unit&) const = default;
};

struct Value {
  std::string name;
  double value = 0.0;
  Unit unit;
  std::optional<double> low = {}, high = {};  // an interval at confidence `level`
  std::optional<double> level = {};
};

/// Row-major numbers. Floats stay floats, so that JSON prints their own shortest digits and NPY half the bytes.
struct Array {
  std::string name;
  std::vector<std::size_t> shape;
  Unit unit;
  std::vector<std::string> axes;  // names of arrays of the same result, one per dimension
  std::variant<std::vector<double>, std::vector<float>> data;
};

struct Warning {
  std::string code;
  std::string text;
};

struct Result {
  std::string analysis;
  std::string subject;
  std::vector<Value> values;
  std::vector<Array> arrays;
  std::vector<Warning> warnings;
  nlohmann::ordered_json provenance;

  const Value* value(std::string_view name) const;
  const Array* array(std::string_view name) const;
  std::size_t memory_bytes() const;
};

}  // namespace bentlight::query
