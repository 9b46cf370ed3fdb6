#include "optics/fft.h"

#include <gtest/gtest.h>

#include <numbers>
#include <random>
#include <vector>

namespace bentlight::optics {

namespace {

std::vector<double> noise(std::size_t count) {
  std::mt19937 random(11);
  std::normal_distribution<double> normal;
  std::vector<double> values(count);
  for (double& value : values) value = normal(random);
  return values;
}

}  // namespace

TEST(RealFft, IsTheDirectSumWithTheMinusSign) {
  for (const std::size_t length : {1UL, 2UL, 7UL, 12UL, 64UL}) {
    const auto values = noise(length);
    const RealFft fft(length);
    std::vector<std::complex<double>> spectrum(fft.bins(), {NAN, NAN});

    fft.forward(values, spectrum);

    for (std::size_t k = 0; k < fft.bins(); ++k) {
      std::complex<double> sum = 0;
      for (std::size_t t = 0; t < length; ++t) {
        sum += values[t] * std::polar(1.0, -2 * std::numbers::pi * static_cast<double>(k * t % length) /
                                               static_cast<double>(length));
      }
      EXPECT_NEAR(std::abs(spectrum[k] - sum), 0.0, 1e-13 * static_cast<double>(length));
    }
  }
}

TEST(RealFft, InverseOfForwardIsTheSeriesTimesItsLength) {
  const auto values = noise(1000);
  const RealFft fft(1000);
  std::vector<std::complex<double>> spectrum(fft.bins());
  std::vector<double> back(1000, NAN);

  fft.forward(values, spectrum);
  fft.inverse(spectrum, back);

  for (std::size_t t = 0; t < 1000; ++t) EXPECT_NEAR(back[t], 1000 * values[t], 1e-11);
}

TEST(RealFft, RefusesArraysOfAnotherLength) {
  const RealFft fft(8);
  std::vector<double> values(7);
  std::vector<std::complex<double>> spectrum(5);
  EXPECT_THROW(fft.forward(values, spectrum), std::invalid_argument);
  EXPECT_THROW(RealFft(0), std::invalid_argument);
}

}  // namespace bentlight::optics
