#include "optics/atmosphere.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <vector>

namespace bentlight::optics {

namespace {

constexpr double degree = std::numbers::pi / 180;

}  // namespace

// U.S. Standard Atmosphere, 1976, table IV by geopotential altitude, as methods 1.8 gives it: each figure to
// its last printed digit.
TEST(StandardAtmosphere, AgreesWithTheTable) {
  struct Row {
    double altitude_m, temperature_k, pressure_pa, density_kg_m3, sound_speed_m_s;
  };
  const std::vector<Row> table = {
      {0, 288.15, 101325, 1.2250, 340.294},        {1000, 281.65, 89874.6, 1.11164, 336.434},
      {5000, 255.65, 54019.9, 0.736116, 320.529},  {10000, 223.15, 26436.2, 0.412706, 299.463},
      {11000, 216.65, 22632.0, 0.363918, 295.069}, {15000, 216.65, 12044.6, 0.193674, 295.069}};
  for (const auto& row : table) {
    const Air air = standard_atmosphere(row.altitude_m).value();
    EXPECT_NEAR(air.temperature_k, row.temperature_k, 0.005);
    EXPECT_NEAR(air.pressure_pa, row.pressure_pa, 0.06);
    EXPECT_NEAR(air.density_kg_m3, row.density_kg_m3, 6e-7 + (row.altitude_m <= 1000 ? 5e-6 : 0.0));
    EXPECT_NEAR(air.sound_speed_m_s, row.sound_speed_m_s, 6e-4);
  }
}

TEST(StandardAtmosphere, IsContinuousAtTheTropopause) {
  const Air below = standard_atmosphere(11000 - 1e-6).value(),
            above = standard_atmosphere(11000 + 1e-6).value();
  EXPECT_NEAR(below.pressure_pa, above.pressure_pa, 1e-4);
}

TEST(StandardAtmosphere, RefusesAltitudesBeyondItsTwoLayers) {
  for (const double altitude_m : {-5001.0, 20001.0, std::nan("")}) {
    const auto air = standard_atmosphere(altitude_m);
    ASSERT_FALSE(air);
    EXPECT_EQ(air.error().code, ErrorCode::bad_parameter);
  }
}

// methods 1.6; at sea level and Mach 0.5 a length of 0.3 m counts a quarter.
TEST(NormalisingLength, ScalesWithDensityMachSquaredAndLength) {
  EXPECT_NEAR(normalising_length_m({.density_kg_m3 = 1.225, .mach = 0.5, .reference_length_m = 0.3}), 0.075,
              1e-15);
  EXPECT_NEAR(normalising_length_m({.density_kg_m3 = 0.6125, .mach = 1.0, .reference_length_m = 2.0}), 1.0,
              1e-15);
}

// NACA Report 1135, table I at Mach 0.5 (from memory): T/T0 = 0.9524, p/p0 = 0.8430, rho/rho0 = 0.8852.
TEST(IsentropicRatios, AgreeWithTheTableAtMachHalf) {
  const auto ratios = isentropic_ratios(0.5);
  EXPECT_NEAR(1 / ratios.temperature, 0.9524, 5e-5);
  EXPECT_NEAR(1 / ratios.pressure, 0.8430, 5e-5);
  EXPECT_NEAR(1 / ratios.density, 0.8852, 5e-5);
  EXPECT_NEAR(ratios.density, 1.12973, 5e-6);  // methods 1.9
}

// methods 1.10, computed there.
TEST(ViewingAngles, AgreeWithTheWorkedExamples) {
  const auto sideways = viewing_angles(90 * degree, 0);
  EXPECT_NEAR(sideways.look_back_rad / degree, 90.0, 1e-9);
  EXPECT_NEAR(sideways.modified_elevation_rad / degree, 0.0, 1e-9);
  const auto back = viewing_angles(120 * degree, 30 * degree);
  EXPECT_NEAR(back.look_back_rad / degree, 115.66, 0.005);
  EXPECT_NEAR(back.modified_elevation_rad / degree, 33.69, 0.005);
}

TEST(ViewingAngles, AreThePolarAnglesOfTheBeamAboutTheStream) {
  for (double azimuth = -170; azimuth <= 180; azimuth += 10) {
    for (double elevation = 5; elevation < 90; elevation += 10) {
      // The beam as a unit vector: against the stream, across, and out of the wall.
      const double against = std::cos(azimuth * degree) * std::cos(elevation * degree);
      const double across = std::abs(std::sin(azimuth * degree)) * std::cos(elevation * degree);
      const double out = std::sin(elevation * degree);

      const auto angles = viewing_angles(azimuth * degree, elevation * degree);

      EXPECT_NEAR(std::cos(angles.look_back_rad), against, 1e-12);
      EXPECT_NEAR(angles.modified_elevation_rad, std::atan2(out, across), 1e-9);
    }
  }
}

TEST(ViewingAngles, OnTheCentrelineHaveTheBeamUpright) {
  for (const double azimuth : {0.0, 180.0}) {
    for (const double elevation : {0.0, 30.0, 90.0}) {
      EXPECT_NEAR(viewing_angles(azimuth * degree, elevation * degree).modified_elevation_rad,
                  std::numbers::pi / 2, 1e-9);
    }
  }
}

}  // namespace bentlight::optics
