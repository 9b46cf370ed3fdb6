// Apertures, frames and series whose properties are known, for tests of what computes on them.
#pragma once

#include <cmath>
#include <cstddef>
#include <random>
#include <span>
#include <vector>

#include "optics/aperture.h"
#include "optics/frame_block.h"

namespace bentlight::test {

/// A square grid of `across` cells over a disc (or annulus) that touches its edges, centered on the axis.
inline optics::Grid disc_grid(double diameter_m, std::size_t across, double obscuration = 0.0) {
  optics::Grid grid{.rows = across, .columns = across, .mask = std::vector<std::uint8_t>(across * across, 0)};
  for (std::size_t i = 0; i < across; ++i) {
    const double place_m = diameter_m * ((static_cast<double>(i) + 0.5) / static_cast<double>(across) - 0.5);
    grid.x_m.push_back(place_m);
    grid.y_m.push_back(place_m);
  }
  for (std::size_t row = 0; row < across; ++row) {
    for (std::size_t column = 0; column < across; ++column) {
      const double share = std::hypot(grid.x_m[column], grid.y_m[row]) / (diameter_m / 2);
      grid.mask[row * across + column] = share <= 1.0 && share >= obscuration;
    }
  }
  return grid;
}

inline optics::Aperture disc(double diameter_m, std::size_t across, double obscuration = 0.0) {
  return optics::Aperture::of(disc_grid(diameter_m, across, obscuration)).value();
}

/// The values of `opd_m(x_m, y_m)` at the points of an aperture.
template <class Opd>
std::vector<double> values_on(const optics::Aperture& aperture, Opd opd_m) {
  std::vector<double> values(aperture.points());
  for (std::size_t p = 0; p < values.size(); ++p) values[p] = opd_m(aperture.x_m()[p], aperture.y_m()[p]);
  return values;
}

/// Frames as a reader hands them on: the first point's value as shift, the rest rounded to float.
inline optics::FrameBlock block_of(std::span<const std::vector<double>> frames, std::size_t first = 0) {
  optics::FrameBlock block;
  block.resize({first, frames.size()}, frames.front().size());
  for (std::size_t f = 0; f < frames.size(); ++f) {
    block.shift_m[f] = frames[f].front();
    block.finite[f] = 1;
    for (std::size_t p = 0; p < block.points; ++p) {
      const double value = frames[f][p] - block.shift_m[f];
      block.frame(f)[p] = static_cast<float>(value);
      if (!std::isfinite(value)) block.finite[f] = 0;
    }
  }
  return block;
}

/// Frames of a few plane waves that drift, with white noise on top; rms about `ripple_m`.
inline std::vector<std::vector<double>> rippled_frames(const optics::Aperture& aperture,
                                                       std::size_t count,
                                                       double ripple_m,
                                                       unsigned seed) {
  std::mt19937_64 random(seed);
  std::normal_distribution<double> normal;
  struct Wave {
    double kx, ky, speed, phase, height;
  };
  std::vector<Wave> waves(12);
  for (auto& wave : waves) {
    wave = {normal(random) * 8, normal(random) * 8, normal(random), normal(random) * 3, 0.35 * ripple_m};
  }
  std::vector<std::vector<double>> frames;
  for (std::size_t t = 0; t < count; ++t) {
    frames.push_back(values_on(aperture, [&](double x_m, double y_m) {
      const double x = x_m / aperture.radius_m(), y = y_m / aperture.radius_m();
      double value = 0.2 * ripple_m * normal(random);
      for (const auto& wave : waves) {
        value += wave.height *
                 std::sin(wave.kx * x + wave.ky * y + wave.speed * static_cast<double>(t) + wave.phase);
      }
      return value;
    }));
  }
  return frames;
}

/// A first-order autoregressive series of unit variance: r_k = phi^k, standing still from its first value.
inline std::vector<double> autoregressive(std::size_t count, double phi, std::mt19937_64& random) {
  std::normal_distribution<double> normal;
  std::vector<double> series(count);
  double value = normal(random);
  for (double& next : series) {
    next = value;
    value = phi * value + std::sqrt(1 - phi * phi) * normal(random);
  }
  return series;
}

/// Michelson's hundred measurements of the speed of light in 1879, in thousand km/s, in the order of NIST's
/// StRD data set Michelso. The values are from memory; that they have the certified mean, deviation and
/// autocorrelation to all digits, which tests check, vouches for them.
inline std::vector<double> michelson() {
  std::vector<double> values;
  for (const int thousandths :
       {850,  740, 900, 1070, 930, 850, 950, 980, 980, 880, 1000, 980, 930, 650, 760, 810, 1000,
        1000, 960, 960, 960,  940, 960, 940, 880, 800, 850, 880,  900, 840, 830, 790, 810, 880,
        880,  830, 800, 790,  760, 800, 880, 880, 880, 860, 720,  720, 620, 860, 970, 950, 880,
        910,  850, 870, 840,  840, 850, 840, 840, 840, 890, 810,  810, 820, 800, 770, 760, 740,
        750,  760, 910, 920,  890, 860, 880, 720, 840, 850, 850,  780, 890, 840, 780, 810, 760,
        810,  790, 810, 820,  850, 870, 870, 810, 740, 810, 940,  950, 800, 810, 870}) {
    values.push_back((299000 + thousandths) / 1000.0);
  }
  return values;
}

}  // namespace bentlight::test
