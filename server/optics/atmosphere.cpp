#include "optics/atmosphere.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

namespace bentlight::optics {

namespace {

// Constants of the 1976 standard.
constexpr double gas_constant_j_kg_k = 287.05287;
constexpr double gravity_m_s2 = 9.80665;
constexpr double sea_level_temperature_k = 288.15;
constexpr double sea_level_pressure_pa = 101325.0;
constexpr double lapse_rate_k_m = -0.0065;
constexpr double tropopause_m = 11000.0;
constexpr double lowest_m = -5000.0, highest_m = 20000.0;

double troposphere_pressure_pa(double temperature_k) {
  return sea_level_pressure_pa * std::pow(temperature_k / sea_level_temperature_k,
                                          -gravity_m_s2 / (gas_constant_j_kg_k * lapse_rate_k_m));
}

}  // namespace

Expected<Air> standard_atmosphere(double geopotential_altitude_m) {
  if (!(geopotential_altitude_m >= lowest_m && geopotential_altitude_m <= highest_m)) {
    return failure(ErrorCode::bad_parameter,
                   fmt::format("the standard atmosphere here does not reach {} m", geopotential_altitude_m),
                   "altitude", {fmt::format("{} to {} m", lowest_m, highest_m)});
  }
  const double temperature_k =
      sea_level_temperature_k + lapse_rate_k_m * std::min(geopotential_altitude_m, tropopause_m);
  const double above_m = std::max(0.0, geopotential_altitude_m - tropopause_m);
  const double pressure_pa = troposphere_pressure_pa(temperature_k) *
                             std::exp(-gravity_m_s2 * above_m / (gas_constant_j_kg_k * temperature_k));
  return Air{.temperature_k = temperature_k,
             .pressure_pa = pressure_pa,
             .density_kg_m3 = pressure_pa / (gas_constant_j_kg_k * temperature_k),
             .sound_speed_m_s = std::sqrt(heat_capacity_ratio * gas_constant_j_kg_k * temperature_k)};
}

double normalising_length_m(const FlowScale& flow) {
  return flow.density_kg_m3 / sea_level_density_kg_m3 * flow.mach * flow.mach * flow.reference_length_m;
}

IsentropicRatios isentropic_ratios(double mach) {
  const double temperature = 1.0 + (heat_capacity_ratio - 1.0) / 2.0 * mach * mach;
  const double density = std::pow(temperature, 1.0 / (heat_capacity_ratio - 1.0));
  return {.temperature = temperature, .pressure = density * temperature, .density = density};
}

ViewingAngles viewing_angles(double azimuth_rad, double elevation_rad) {
  const double upstream = std::clamp(std::cos(azimuth_rad) * std::cos(elevation_rad), -1.0, 1.0);
  const double sideways = std::abs(std::sin(azimuth_rad));
  // On the centreline the beam lies in the plane of symmetry, also where it touches the wall.
  const bool is_on_centreline = sideways < 1e-12;
  return {.look_back_rad = std::acos(upstream),
          .modified_elevation_rad =
              is_on_centreline ? std::numbers::pi / 2 : std::atan(std::tan(elevation_rad) / sideways)};
}

}  // namespace bentlight::optics
