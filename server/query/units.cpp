#include "query/units.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdlib>
#include <stdexcept>
#include <utility>
#include <vector>

#include "base/text.h"

namespace bentlight::query {

namespace {

constexpr std::array length_units = {LengthUnit::um, LengthUnit::nm, LengthUnit::m, LengthUnit::waves,
                                     LengthUnit::normalised};

// U.S. Standard Atmosphere 1976, density at sea level.
constexpr double sea_level_density_kg_m3 = 1.225;

/// A factor of a unit's name: a symbol and its power, "Hz" or "m2".
struct Factor {
  std::string symbol;
  int power = 1;
};

Factor parse_factor(std::string_view text) {
  const auto digits = text.find_last_not_of("0123456789") + 1;
  if (digits == text.size() || digits == 0) return {.symbol = std::string(text)};
  const auto power = parse_whole_number(text.substr(digits));
  return {.symbol = std::string(text.substr(0, digits)), .power = power ? static_cast<int>(*power) : 1};
}

std::vector<Factor> parse_product(std::string_view text) {
  std::vector<Factor> factors;
  for (const std::string& part : split(text, ' ')) {
    if (!part.empty() && part != "1") factors.push_back(parse_factor(part));
  }
  return factors;
}

std::string product_text(const std::vector<Factor>& factors) {
  std::string text;
  for (const Factor& factor : factors) {
    text += (text.empty() ? "" : " ") + factor.symbol;
    if (factor.power != 1) text += fmt::format("{}", factor.power);
  }
  return text;
}

/// Replaces `power` of the metres among `factors`; what is more than that stays metres.
bool replace_metres(std::vector<Factor>& factors, int power, std::string_view length) {
  const auto metres = std::ranges::find_if(
      factors, [&](const Factor& factor) { return factor.symbol == "m" && factor.power >= power; });
  if (metres == factors.end()) return false;
  metres->power -= power;
  auto place = metres->power == 0 ? factors.erase(metres) : metres;
  if (!length.empty()) factors.insert(place, Factor{.symbol = std::string(length), .power = power});
  return true;
}

/// What a length in metres is divided by, and how that came about.
struct Scale {
  double unit_m = 1.0;
  double units_per_m = 1.0;
  std::string symbol;  // empty: without dimension
  nlohmann::ordered_json account;
};

/// A condition that must be stated and positive to divide by.
Expected<double> needed(const std::optional<double>& condition, std::string_view attribute, LengthUnit unit) {
  if (condition && std::isfinite(*condition) && *condition > 0.0) return *condition;
  const std::string state = condition ? fmt::format("states {} = {}", attribute, shortest(*condition))
                                      : fmt::format("does not state {}", attribute);
  return failure(ErrorCode::missing_condition,
                 fmt::format("length_unit={} needs a positive {}, and the view's file {}", to_text(unit),
                             attribute, state),
                 "length_unit", {"um", "nm", "m"});
}

Scale scale_of_unit(LengthUnit unit, double units_per_m) {
  const std::string symbol(to_text(unit));
  return {.unit_m = 1.0 / units_per_m,
          .units_per_m = units_per_m,
          .symbol = symbol,
          .account = {{"unit", symbol}}};
}

Expected<Scale> scale_in_waves(const OpticalConditions& conditions) {
  const auto wavelength_m = needed(conditions.wavelength_m, "wavelength_m", LengthUnit::waves);
  if (!wavelength_m) return failure(wavelength_m);
  return Scale{.unit_m = *wavelength_m,
               .units_per_m = 1.0 / *wavelength_m,
               .symbol = "waves",
               .account = {{"unit", "waves"}, {"wavelength_m", *wavelength_m}}};
}

Expected<Scale> scale_normalised(const OpticalConditions& conditions) {
  const auto density = needed(conditions.density_kg_m3, "density_kg_m3", LengthUnit::normalised);
  if (!density) return failure(density);
  const auto mach = needed(conditions.mach, "mach", LengthUnit::normalised);
  if (!mach) return failure(mach);
  const auto length_m = needed(conditions.reference_length_m, "reference_length_m", LengthUnit::normalised);
  if (!length_m) return failure(length_m);
  const double reference_m = *density / sea_level_density_kg_m3 * *mach * *mach * *length_m;
  return Scale{.unit_m = reference_m,
               .units_per_m = 1.0 / reference_m,
               .symbol = "",
               .account = {{"unit", "normalised"},
                           {"divided_by_m", reference_m},
                           {"formula", "density / sea-level density * mach^2 * reference length"},
                           {"density_kg_m3", *density},
                           {"sea_level_density_kg_m3", sea_level_density_kg_m3},
                           {"mach", *mach},
                           {"reference_length_m", *length_m}}};
}

Expected<Scale> scale_of(LengthUnit unit, const OpticalConditions& conditions) {
  switch (unit) {
    case LengthUnit::m:
      return scale_of_unit(unit, 1.0);
    case LengthUnit::um:
      return scale_of_unit(unit, 1e6);
    case LengthUnit::nm:
      return scale_of_unit(unit, 1e9);
    case LengthUnit::waves:
      return scale_in_waves(conditions);
    case LengthUnit::normalised:
      return scale_normalised(conditions);
  }
  throw std::logic_error("scale_of: a unit without a scale");
}

/// What a number that holds `power` lengths is multiplied by. A reciprocal is taken once, at the end.
double multiplier(const Scale& scale, int power) {
  const double base = power > 0 ? scale.units_per_m : scale.unit_m;
  return std::pow(base, std::abs(power));
}

bool holds_lengths(const Result& result) {
  const auto holds = [](const auto& item) { return item.unit.opd_power != 0; };
  return std::ranges::any_of(result.values, holds) || std::ranges::any_of(result.arrays, holds);
}

void convert_value(Value& value, const Scale& scale) {
  const double factor = multiplier(scale, value.unit.opd_power);
  value.value *= factor;
  if (value.low) *value.low *= factor;
  if (value.high) *value.high *= factor;
}

void convert_array(Array& array, const Scale& scale) {
  const double factor = multiplier(scale, array.unit.opd_power);
  std::visit(
      [&]<class Number>(std::vector<Number>& data) {
        for (Number& each : data) each = static_cast<Number>(static_cast<double>(each) * factor);
      },
      array.data);
}

}  // namespace

std::string_view to_text(LengthUnit unit) {
  switch (unit) {
    case LengthUnit::m:
      return "m";
    case LengthUnit::um:
      return "um";
    case LengthUnit::nm:
      return "nm";
    case LengthUnit::waves:
      return "waves";
    case LengthUnit::normalised:
      return "normalised";
  }
  throw std::logic_error("to_text: a length unit without a name");
}

Expected<LengthUnit> parse_length_unit(std::string_view text) {
  std::vector<std::string> names;
  for (const LengthUnit unit : length_units) {
    if (to_text(unit) == text) return unit;
    names.emplace_back(to_text(unit));
  }
  return failure(ErrorCode::bad_unit,
                 fmt::format("length_unit={} is not one of {}", text, fmt::join(names, ", ")), "length_unit",
                 names);
}

std::string with_length(std::string_view name, int power, std::string_view length) {
  const auto slash = name.find('/');
  auto above = parse_product(name.substr(0, slash));
  auto below =
      slash == std::string_view::npos ? std::vector<Factor>() : parse_product(name.substr(slash + 1));
  if (power != 0 && !replace_metres(power > 0 ? above : below, std::abs(power), length)) {
    throw std::invalid_argument(
        fmt::format("with_length: {} does not hold the length to the power {}", name, power));
  }
  const std::string top = above.empty() ? "1" : product_text(above);
  return below.empty() ? top : top + "/" + product_text(below);
}

Expected<void> convert(Result& result, LengthUnit unit, const OpticalConditions& conditions) {
  if (!holds_lengths(result)) return {};
  auto scale = scale_of(unit, conditions);
  if (!scale) return failure(scale);
  // Names first: they are all that can go wrong, and a result is converted whole or not at all.
  std::vector<std::pair<Unit*, std::string>> names;
  const auto collect = [&](auto& items) {
    for (auto& item : items) {
      if (item.unit.opd_power == 0) continue;
      names.emplace_back(&item.unit, with_length(item.unit.name, item.unit.opd_power, scale->symbol));
    }
  };
  collect(result.values);
  collect(result.arrays);
  for (auto& [place, converted] : names) place->name = std::move(converted);
  for (Value& value : result.values) {
    if (value.unit.opd_power != 0) convert_value(value, *scale);
  }
  for (Array& array : result.arrays) {
    if (array.unit.opd_power != 0) convert_array(array, *scale);
  }
  result.provenance["length_unit"] = std::move(scale->account);
  return {};
}

}  // namespace bentlight::query
