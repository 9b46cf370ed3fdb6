// What statistics a view should show: closed forms of the synthesis, not measurements of what was written.
#pragma once

#include <Eigen/Core>
#include <cstddef>
#include <vector>

#include "demo/histories.h"
#include "demo/scenario.h"
#include "demo/shapes.h"
#include "demo/slow_series.h"

namespace bentlight::demo {

/// Ensemble expectations for a record of some length, over the whole aperture.
struct Expectation {
  double opd_rms_m = 0.0;                 // overall, piston, tilt and the record's own mean map removed
  double opd_rms_standard_error_m = 0.0;  // one sigma, of one record's value about it
  double opd_rms_with_mean_m = 0.0;       // piston and tilt removed, steady lensing kept
  double steady_rms_m = 0.0;              // of the steady lensing, piston and tilt removed
  double noise_rms_m = 0.0;               // at a point
  double tip_rms_rad = 0.0;  // about its mean, by least squares over the aperture: flow, jitter and line
  double tilt_rms_rad = 0.0;
};

/// The geometry's part of every expectation, worked out once for all views.
///
///   source   For a frame w = sum of shapes with Gaussian weights, q = mean square of its residual after
///   projecting
///            out piston and tilt. With G the shapes' Gram matrix after that projection, divided by the
///            number of points, and Z(tau) the weights' covariance: E q = tr(G Z(0)), and by Isserlis'
///            theorem cov(q(t), q(t + tau)) = 2 tr(G Z(tau) G Z(tau)'). Z consists of 2 x 2 blocks s^2 r(tau)
///            R(omega tau) with r(tau) from SlowSeries, so sums over tau are geometric. The roll-up is not
///            Gaussian: its own term uses the moments of its log-normal modulation, its terms with the waves
///            its correlation, both summed lag by lag.
class ExpectedStatistics {
 public:
  ExpectedStatistics(const Scenario& scenario, const DemoGrid& grid);

  /// Amplitudes that give the view its flow_rms_m and roll_up_share exactly.
  Amplitudes amplitudes(const View& view) const;

  Expectation of(const View& view, std::size_t frames) const;

 private:
  struct Turning;  // what two pairs share of the Gram matrix
  Turning turning(Eigen::Index k, Eigen::Index l) const;
  double pair_energy(Eigen::Index pair) const {
    return residual_(pair, pair) + residual_(pairs_ + pair, pairs_ + pair);
  }
  void fill_roll_up_correlation();
  double waves_variance(const std::vector<double>& variance, double frames) const;
  double crossed_variance(const std::vector<double>& variance, double frames) const;
  double modulation_variance(double roll_up_energy, double frames) const;
  double mean_map_energy(const std::vector<double>& variance, double frames) const;
  double slope_variance(const Eigen::VectorXd& slopes, const std::vector<double>& variance) const;
  std::vector<double> pair_variances(const View& view) const;

  const Scenario& scenario_;
  const DemoGrid& grid_;
  Eigen::Index pairs_;
  Eigen::MatrixXd residual_;        // Gram matrix of the pairs' shapes, cosines first
  Eigen::VectorXd tip_, tilt_;      // their slopes along x and y, 1/m
  std::vector<double> turn_rad_;    // per frame and pair
  SlowSeries slow_;                 // of the waves
  std::vector<double> roll_up_;     // correlation of the roll-up's phasor lag by lag, its turning left out
  std::vector<double> modulation_;  // covariance of m^2 lag by lag
};

}  // namespace bentlight::demo
