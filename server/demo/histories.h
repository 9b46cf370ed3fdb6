// How much of each shape a view holds at each instant, and the companion signals that go with it.
#pragma once

#include <complex>
#include <cstddef>
#include <cstdint>
#include <vector>

#include "demo/normal_numbers.h"
#include "demo/scenario.h"
#include "demo/shapes.h"
#include "demo/slow_series.h"

namespace bentlight::demo {

/// The amplitudes of a view, for the roll-up: sqrt(2 * variance at a point).
struct Amplitudes {
  std::vector<double> wave_m;  // [waves] standard deviation of the real and of the imaginary part
  double roll_up_m = 0.0;
};

/// Time histories of one view on the undisturbed clock: instant n is at n / frame_rate_hz.
///
///   threads  belongs to one thread
///   cost     the waves are made as they are asked for; the other series of the record are held, 20 bytes an
///   instant
class Histories {
 public:
  Histories(const Scenario& scenario, const View& view, const Amplitudes& amplitudes, std::size_t instants);

  /// Writes weights [ShapeOrder::count()] of an instant in metres and radians. Instants must not fall from
  /// call to call; the one of the call before may come again.
  void weights_at(std::size_t instant, float* weights);

  /// The surface pressure, ahead of the roll-up by SignalLaws::pressure_lead_frames; in Pa.
  float surface_pressure_pa(std::size_t instant) const;
  /// The accelerometer, correlated with the tip jitter; in m/s2. Tunnel only.
  float acceleration_m_s2(std::size_t instant) const;

 private:
  void make_roll_up(const RollUp& law, double amplitude_m, std::size_t instants);
  void make_tracker(const TunnelEffects& law, std::size_t instants);
  void start_waves(const Amplitudes& amplitudes);
  void advance_waves();

  const Scenario& scenario_;
  const View& view_;
  ShapeOrder order_;
  bool tunnel_;
  double roll_up_rms_m_;
  std::vector<std::complex<float>> roll_up_m_;              // [instants + lead]
  std::vector<float> tip_rad_, tilt_rad_, piston_m_;        // [instants], empty in a simulation
  std::vector<float> pressure_noise_, acceleration_noise_;  // [instants], standard normal

  NormalNumbers wave_numbers_;
  SlowSeries slow_;
  std::size_t wave_instant_ = 0;
  std::vector<std::complex<double>> turn_;            // [waves], what a step of convection does
  std::vector<double> wave_m_;                        // [waves]
  std::vector<std::complex<double>> driving_, wave_;  // [waves], x and y of SlowSeries, of unit variance
  std::vector<float> normals_;                        // [2 * waves]
};

}  // namespace bentlight::demo
