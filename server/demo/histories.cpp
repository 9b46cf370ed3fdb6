#include "demo/histories.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <stdexcept>

namespace bentlight::demo {

namespace {

constexpr double two_pi = 2.0 * std::numbers::pi;

/// Streams of random numbers of a view, counted from View::stream.
enum Stream : std::uint64_t { waves, modulation, phase, tip, tilt, piston, pressure, acceleration, phases };

std::vector<float> normal_series(const Scenario& scenario,
                                 const View& view,
                                 Stream stream,
                                 std::size_t count) {
  std::vector<float> series(count);
  NormalNumbers(scenario.options.seed, view.stream + stream).fill(0, series);
  return series;
}

/// A stationary Gaussian series of unit variance whose correlation falls by 1/e in `memory` steps (AR(1)).
std::vector<float> wandering_series(std::vector<float> normals, double memory) {
  const double keep = std::exp(-1.0 / memory), renew = std::sqrt(1.0 - keep * keep);
  double value = normals.empty() ? 0.0 : static_cast<double>(normals[0]);
  for (std::size_t i = 1; i < normals.size(); ++i) {
    value = keep * value + renew * static_cast<double>(normals[i]);
    normals[i] = static_cast<float>(value);
  }
  return normals;
}

/// The same with the memory of SlowSeries. The first number of the series begins both filters in equilibrium.
std::vector<float> slowly_wandering_series(std::vector<float> normals, const SlowSeries& slow) {
  double x = slow.start_x * static_cast<double>(normals[0]);
  double y =
      slow.start_follow * static_cast<double>(normals[0]) + slow.start_own * static_cast<double>(normals[1]);
  for (float& value : normals) {
    const double kick = slow.renewal * static_cast<double>(value);
    value = static_cast<float>(y);
    x = slow.b * x + kick;
    y = slow.a * y + x;
  }
  return normals;
}

}  // namespace

Histories::Histories(const Scenario& scenario,
                     const View& view,
                     const Amplitudes& amplitudes,
                     std::size_t instants)
    : scenario_(scenario),
      view_(view),
      order_(scenario),
      tunnel_(view.run == Run::tunnel),
      roll_up_rms_m_(amplitudes.roll_up_m / std::numbers::sqrt2),
      wave_numbers_(scenario.options.seed, view.stream + waves),
      slow_(scenario.random.forgetting, scenario.frame_step_s()) {
  make_roll_up(scenario.roll_up, amplitudes.roll_up_m, instants + scenario.signals.pressure_lead_frames);
  if (tunnel_) make_tracker(scenario.tunnel, instants);
  pressure_noise_ = normal_series(scenario, view, pressure, instants);
  acceleration_noise_ = normal_series(scenario, view, acceleration, instants);
  start_waves(amplitudes);
}

void Histories::start_waves(const Amplitudes& amplitudes) {
  const std::size_t count = scenario_.waves.size();
  std::vector<float> normals(4 * count);
  wave_numbers_.fill(0, normals);
  const auto normal = [&](std::size_t quarter, std::size_t k) {
    return std::complex<double>(static_cast<double>(normals[quarter * count + k]),
                                static_cast<double>(normals[(quarter + 1) * count + k]));
  };
  for (std::size_t k = 0; k < count; ++k) {
    const double angle =
        -scenario_.waves[k].kx_rad_m * scenario_.random.convective_speed_m_s * scenario_.frame_step_s();
    turn_.push_back(std::polar(1.0, angle));
    driving_.push_back(slow_.start_x * normal(0, k));
    wave_.push_back(slow_.start_follow * normal(0, k) + slow_.start_own * normal(2, k));
  }
  wave_m_ = amplitudes.wave_m;
  normals_.resize(2 * count);
}

void Histories::make_roll_up(const RollUp& law, double amplitude_m, std::size_t instants) {
  const double step = scenario_.frame_step_s(), s = law.modulation;
  const auto slow = slowly_wandering_series(normal_series(scenario_, view_, modulation, instants),
                                            SlowSeries(law.modulation_forgetting, step));
  const auto wander =
      wandering_series(normal_series(scenario_, view_, phase, instants), law.wander_memory_s / step);
  double angle = -two_pi * uniform_number(scenario_.options.seed, view_.stream + phases, 0);
  roll_up_m_.reserve(instants);
  for (std::size_t i = 0; i < instants; ++i) {
    const double size = amplitude_m * std::exp(s * static_cast<double>(slow[i]) - s * s);
    roll_up_m_.emplace_back(std::polar(size, angle));
    const double frequency = law.frequency_hz + law.wander_hz * static_cast<double>(wander[i]);
    angle = std::remainder(angle - two_pi * frequency * step, two_pi);
  }
}

void Histories::make_tracker(const TunnelEffects& law, std::size_t instants) {
  const double step = scenario_.frame_step_s();
  const auto scaled = [&](Stream stream, double memory_s, double rms) {
    auto series = wandering_series(normal_series(scenario_, view_, stream, instants), memory_s / step);
    for (float& value : series) value *= static_cast<float>(rms);
    return series;
  };
  tip_rad_ = scaled(tip, law.jitter_memory_s, law.jitter_rad);
  tilt_rad_ = scaled(tilt, law.jitter_memory_s, law.jitter_rad);
  piston_m_ = scaled(piston, law.piston_memory_s, law.piston_m);
  const double start = two_pi * uniform_number(scenario_.options.seed, view_.stream + phases, 1);
  for (std::size_t i = 0; i < instants; ++i) {
    const double angle = start + two_pi * law.vibration_hz * step * static_cast<double>(i);
    tip_rad_[i] += static_cast<float>(law.vibration_rad * std::numbers::sqrt2 * std::sin(angle));
  }
}

void Histories::advance_waves() {
  const std::size_t count = wave_.size();
  wave_numbers_.fill(++wave_instant_, normals_);
  for (std::size_t k = 0; k < count; ++k) {
    const std::complex<double> normal(static_cast<double>(normals_[k]),
                                      static_cast<double>(normals_[count + k]));
    driving_[k] = slow_.b * turn_[k] * driving_[k] + slow_.renewal * normal;
    wave_[k] = slow_.a * turn_[k] * wave_[k] + driving_[k];
  }
}

void Histories::weights_at(std::size_t instant, float* weights) {
  if (instant < wave_instant_) throw std::invalid_argument("Histories: instants must not fall");
  while (wave_instant_ < instant) advance_waves();
  // Re(z exp(i k x)) = Re z cos(k x) - Im z sin(k x)
  const auto count = static_cast<Eigen::Index>(wave_.size());
  for (Eigen::Index k = 0; k < count; ++k) {
    const auto i = static_cast<std::size_t>(k);
    weights[order_.cosine(k)] = static_cast<float>(wave_m_[i] * wave_[i].real());
    weights[order_.sine(k)] = static_cast<float>(-wave_m_[i] * wave_[i].imag());
  }
  weights[order_.cosine(count)] = roll_up_m_[instant].real();
  weights[order_.sine(count)] = -roll_up_m_[instant].imag();
  weights[order_.steady_even()] = weights[order_.steady_odd()] = 1.0F;
  weights[order_.piston()] = tunnel_ ? piston_m_[instant] : 0.0F;
  weights[order_.tip()] = tunnel_ ? tip_rad_[instant] : 0.0F;
  weights[order_.tilt()] = tunnel_ ? tilt_rad_[instant] : 0.0F;
}

float Histories::surface_pressure_pa(std::size_t instant) const {
  const SignalLaws& law = scenario_.signals;
  const double coherent =
      static_cast<double>(roll_up_m_[instant + law.pressure_lead_frames].real()) / roll_up_rms_m_;
  return static_cast<float>(law.pressure_pa * (std::sqrt(law.pressure_coherent_share) * coherent +
                                               std::sqrt(1.0 - law.pressure_coherent_share) *
                                                   static_cast<double>(pressure_noise_[instant])));
}

float Histories::acceleration_m_s2(std::size_t instant) const {
  const SignalLaws& law = scenario_.signals;
  const TunnelEffects& tunnel = scenario_.tunnel;
  const double jitter =
      static_cast<double>(tip_rad_.at(instant)) / std::hypot(tunnel.jitter_rad, tunnel.vibration_rad);
  const double r = law.acceleration_correlation;
  return static_cast<float>(
      law.acceleration_m_s2 *
      (r * jitter + std::sqrt(1.0 - r * r) * static_cast<double>(acceleration_noise_[instant])));
}

}  // namespace bentlight::demo
