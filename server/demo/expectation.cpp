#include "demo/expectation.h"

#include <algorithm>
#include <cmath>
#include <complex>
#include <numbers>

namespace bentlight::demo {

namespace {

/// Sum over |tau| < T of (1 - |tau| / T) keep^|tau| cos(turn tau), by the geometric series.
double windowed_sum(double keep, double turn_rad, double frames) {
  const std::complex<double> z = std::polar(keep, turn_rad), one = 1.0;
  return ((one + z) / (one - z) - 2.0 * z * (one - std::pow(z, frames)) / (frames * (one - z) * (one - z)))
      .real();
}

/// The same for the correlation of a slow series.
double windowed_sum(const SlowSeries& slow, double turn_rad, double frames) {
  return slow.long_part * windowed_sum(slow.a, turn_rad, frames) +
         slow.short_part * windowed_sum(slow.b, turn_rad, frames);
}

/// The same for its square.
double windowed_sum_of_square(const SlowSeries& slow, double turn_rad, double frames) {
  return slow.long_part * slow.long_part * windowed_sum(slow.a * slow.a, turn_rad, frames) +
         2.0 * slow.long_part * slow.short_part * windowed_sum(slow.a * slow.b, turn_rad, frames) +
         slow.short_part * slow.short_part * windowed_sum(slow.b * slow.b, turn_rad, frames);
}

/// The same for a correlation [lags] that has died away at its end.
double windowed_sum(const std::vector<double>& correlation, double turn_rad, double frames) {
  std::complex<double> turned = 1.0;
  const std::complex<double> turn = std::polar(1.0, turn_rad);
  double sum = correlation[0];
  for (std::size_t lag = 1; lag < correlation.size() && static_cast<double>(lag) < frames; ++lag) {
    turned *= turn;
    sum += 2.0 * (1.0 - static_cast<double>(lag) / frames) * correlation[lag] * turned.real();
  }
  return sum;
}

struct PlaneFit {
  double points = 0.0;
  double spread_m2 = 0.0;  // mean of x^2, and of y^2: the grid is symmetric
};

PlaneFit plane_fit(const DemoGrid& grid) {
  PlaneFit fit;
  std::size_t point = 0;
  for (std::size_t row = 0; row < grid.across; ++row) {
    for (const double x : grid.centers_m) {
      if (grid.inside[point++] == 0) continue;
      fit.points += 1.0;
      fit.spread_m2 += x * x;
    }
  }
  fit.spread_m2 /= fit.points;
  return fit;
}

/// One row of the grid at a time: shapes of the pairs at the row's points inside, columns are points.
Eigen::MatrixXd row_shapes(const std::vector<Wave>& waves, const std::vector<double>& x_m, double y_m) {
  const auto pairs = static_cast<Eigen::Index>(waves.size());
  Eigen::MatrixXd shapes(2 * pairs, static_cast<Eigen::Index>(x_m.size()));
  for (Eigen::Index pair = 0; pair < pairs; ++pair) {
    const Wave& wave = waves[static_cast<std::size_t>(pair)];
    for (std::size_t i = 0; i < x_m.size(); ++i) {
      const double angle = wave.kx_rad_m * x_m[i] + wave.ky_rad_m * y_m;
      shapes(pair, static_cast<Eigen::Index>(i)) = std::cos(angle);
      shapes(pairs + pair, static_cast<Eigen::Index>(i)) = std::sin(angle);
    }
  }
  return shapes;
}

std::vector<double> inside_of_row(const DemoGrid& grid, std::size_t row) {
  std::vector<double> x_m;
  for (std::size_t column = 0; column < grid.across; ++column) {
    if (grid.inside[row * grid.across + column]) x_m.push_back(grid.centers_m[column]);
  }
  return x_m;
}

}  // namespace

ExpectedStatistics::ExpectedStatistics(const Scenario& scenario, const DemoGrid& grid)
    : scenario_(scenario),
      grid_(grid),
      pairs_(ShapeOrder(scenario).pairs),
      slow_(scenario.random.forgetting, scenario.frame_step_s()) {
  const auto waves = pair_waves(scenario);
  const PlaneFit fit = plane_fit(grid);
  residual_ = Eigen::MatrixXd::Zero(2 * pairs_, 2 * pairs_);
  Eigen::VectorXd mean = Eigen::VectorXd::Zero(2 * pairs_);
  tip_ = tilt_ = mean;
  for (std::size_t row = 0; row < grid.across; ++row) {
    const auto x_m = inside_of_row(grid, row);
    const Eigen::MatrixXd shapes = row_shapes(waves, x_m, grid.centers_m[row]);
    residual_.noalias() += shapes * shapes.transpose() / fit.points;
    mean += shapes.rowwise().sum() / fit.points;
    tip_ +=
        shapes * Eigen::Map<const Eigen::VectorXd>(x_m.data(), shapes.cols()) / (fit.points * fit.spread_m2);
    tilt_ += shapes.rowwise().sum() * grid.centers_m[row] / (fit.points * fit.spread_m2);
  }
  // The grid's points lie symmetrically, so 1, x and y are orthogonal as they stand.
  residual_ -=
      mean * mean.transpose() + fit.spread_m2 * (tip_ * tip_.transpose() + tilt_ * tilt_.transpose());

  for (const Wave& wave : waves) {
    turn_rad_.push_back(wave.kx_rad_m * scenario.random.convective_speed_m_s * scenario.frame_step_s());
  }
  fill_roll_up_correlation();
}

/// Of the roll-up's phasor m exp(-i psi): E m m' = exp(s^2 (r - 1)), and a phase of variance V loses exp(-V /
/// 2); of m^2, whose logarithm is normal too: exp(4 s^2 r) - 1.
void ExpectedStatistics::fill_roll_up_correlation() {
  const RollUp& law = scenario_.roll_up;
  const double step = scenario_.frame_step_s(), square = law.modulation * law.modulation;
  const double wander = 2.0 * std::numbers::pi * law.wander_hz, memory = law.wander_memory_s;
  const SlowSeries slow(law.modulation_forgetting, step);
  double left = 1.0;
  for (std::size_t lag = 0; left > 1e-9; ++lag) {
    const double t = static_cast<double>(lag) * step, r = slow.correlation(static_cast<double>(lag));
    const double phase_variance = 2.0 * wander * wander * memory * (t + memory * std::expm1(-t / memory));
    roll_up_.push_back(std::exp(square * (r - 1.0) - 0.5 * phase_variance));
    modulation_.push_back(std::expm1(4.0 * square * r));
    left = std::max(roll_up_.back(), modulation_.back());
  }
}

/// The variance of the real part of each pair's weight (that of the imaginary part is the same).
std::vector<double> ExpectedStatistics::pair_variances(const View& view) const {
  const double flow = view.flow_rms_m * view.flow_rms_m;
  double random_energy = 0.0;
  for (Eigen::Index k = 0; k + 1 < pairs_; ++k) {
    random_energy += scenario_.waves[static_cast<std::size_t>(k)].share * pair_energy(k);
  }
  std::vector<double> variances;
  for (const Wave& wave : scenario_.waves) {
    variances.push_back(flow * (1.0 - view.roll_up_share) * wave.share / random_energy);
  }
  variances.push_back(flow * view.roll_up_share / pair_energy(pairs_ - 1));
  return variances;
}

Amplitudes ExpectedStatistics::amplitudes(const View& view) const {
  const auto variances = pair_variances(view);
  Amplitudes amplitudes;
  for (std::size_t k = 0; k + 1 < variances.size(); ++k) amplitudes.wave_m.push_back(std::sqrt(variances[k]));
  amplitudes.roll_up_m = std::sqrt(2.0 * variances.back());  // A cos: half of A^2 is the variance
  return amplitudes;
}

/// A block of G splits into a part that turns with the difference of two frequencies and one that turns with
/// their sum: tr(G_kl R(w_l t) G_kl' R(w_k t)') = 2 differing cos((w_k - w_l) t) + 2 adding cos((w_k + w_l)
/// t).
struct ExpectedStatistics::Turning {
  double differing, adding;
};

ExpectedStatistics::Turning ExpectedStatistics::turning(Eigen::Index k, Eigen::Index l) const {
  const double cc = residual_(k, l), ss = residual_(pairs_ + k, pairs_ + l);
  const double cs = residual_(k, pairs_ + l), sc = residual_(pairs_ + k, l);
  return {.differing = 0.25 * ((cc + ss) * (cc + ss) + (sc - cs) * (sc - cs)),
          .adding = 0.25 * ((cc - ss) * (cc - ss) + (sc + cs) * (sc + cs))};
}

/// What the waves, with themselves and each other, add to the variance of a record's mean of q.
double ExpectedStatistics::waves_variance(const std::vector<double>& variance, double frames) const {
  double sum = 0.0;
  for (Eigen::Index k = 0; k + 1 < pairs_; ++k) {
    for (Eigen::Index l = 0; l <= k; ++l) {
      const auto i = static_cast<std::size_t>(k), j = static_cast<std::size_t>(l);
      const Turning both = turning(k, l);
      const double lags =
          both.differing * windowed_sum_of_square(slow_, turn_rad_[i] - turn_rad_[j], frames) +
          both.adding * windowed_sum_of_square(slow_, turn_rad_[i] + turn_rad_[j], frames);
      sum += (k == l ? 1.0 : 2.0) * variance[i] * variance[j] * 2.0 * lags;
    }
  }
  return 2.0 * sum / frames;
}

/// What the waves add together with the roll-up.
double ExpectedStatistics::crossed_variance(const std::vector<double>& variance, double frames) const {
  std::vector<double> product = roll_up_;
  for (std::size_t lag = 0; lag < product.size(); ++lag) {
    product[lag] *= slow_.correlation(static_cast<double>(lag));
  }
  double sum = 0.0;
  for (Eigen::Index k = 0; k + 1 < pairs_; ++k) {
    const auto i = static_cast<std::size_t>(k);
    const Turning both = turning(pairs_ - 1, k);
    const double lags = both.differing * windowed_sum(product, turn_rad_.back() - turn_rad_[i], frames) +
                        both.adding * windowed_sum(product, turn_rad_.back() + turn_rad_[i], frames);
    sum += 2.0 * variance[i] * variance.back() * 2.0 * lags;
  }
  return 2.0 * sum / frames;
}

/// The roll-up's own term: its mean square follows m^2. What turns with twice its frequency averages out.
double ExpectedStatistics::modulation_variance(double roll_up_energy, double frames) const {
  return roll_up_energy * roll_up_energy * windowed_sum(modulation_, 0.0, frames) / frames;
}

/// What the record's own mean map takes along.
double ExpectedStatistics::mean_map_energy(const std::vector<double>& variance, double frames) const {
  double sum = variance.back() * pair_energy(pairs_ - 1) * windowed_sum(roll_up_, turn_rad_.back(), frames);
  for (Eigen::Index k = 0; k + 1 < pairs_; ++k) {
    const auto i = static_cast<std::size_t>(k);
    sum += variance[i] * pair_energy(k) * windowed_sum(slow_, turn_rad_[i], frames);
  }
  return sum / frames;
}

double ExpectedStatistics::slope_variance(const Eigen::VectorXd& slopes,
                                          const std::vector<double>& variance) const {
  double sum = 0.0;
  for (Eigen::Index k = 0; k < pairs_; ++k) {
    sum += variance[static_cast<std::size_t>(k)] *
           (slopes[k] * slopes[k] + slopes[pairs_ + k] * slopes[pairs_ + k]);
  }
  return sum;
}

namespace {

double steady_mean_square(const SteadyLensing& steady, const DemoGrid& grid, double radius_m) {
  const PlaneFit fit = plane_fit(grid);
  double square = 0.0, mean = 0.0, tip = 0.0, tilt = 0.0;
  std::size_t point = 0;
  for (const double y : grid.centers_m) {
    for (const double x : grid.centers_m) {
      if (grid.inside[point++] == 0) continue;
      const double value = steady_lensing_m(steady, x, y, radius_m) / fit.points;
      square += value * value * fit.points;
      mean += value;
      tip += value * x / fit.spread_m2;
      tilt += value * y / fit.spread_m2;
    }
  }
  return square - mean * mean - fit.spread_m2 * (tip * tip + tilt * tilt);
}

}  // namespace

Expectation ExpectedStatistics::of(const View& view, std::size_t frames) const {
  const auto count = static_cast<double>(frames), points = static_cast<double>(grid_.points);
  const auto variance = pair_variances(view);
  const bool tunnel = view.run == Run::tunnel;
  const TunnelEffects& effects = scenario_.tunnel;
  Expectation expectation;
  expectation.noise_rms_m = tunnel ? effects.sensor_noise_m : 0.0;
  const double noise = expectation.noise_rms_m * expectation.noise_rms_m * (1.0 - 3.0 / points);

  const double mean_map = noise / count + mean_map_energy(variance, count);
  const double total = view.flow_rms_m * view.flow_rms_m + noise;
  const double spread = waves_variance(variance, count) + crossed_variance(variance, count) +
                        modulation_variance(variance.back() * pair_energy(pairs_ - 1), count) +
                        2.0 * noise * noise / (points * count);
  expectation.opd_rms_m = std::sqrt(total - mean_map);
  expectation.opd_rms_standard_error_m = 0.5 * std::sqrt(spread) / expectation.opd_rms_m;

  const double steady = steady_mean_square(view.steady, grid_, 0.5 * scenario_.setting.aperture_diameter_m);
  expectation.steady_rms_m = std::sqrt(steady);
  expectation.opd_rms_with_mean_m = std::sqrt(total + steady);

  const double jitter = tunnel ? effects.jitter_rad * effects.jitter_rad : 0.0;
  const double line = tunnel ? effects.vibration_rad * effects.vibration_rad : 0.0;
  expectation.tip_rms_rad = std::sqrt(slope_variance(tip_, variance) + jitter + line);
  expectation.tilt_rms_rad = std::sqrt(slope_variance(tilt_, variance) + jitter);
  return expectation;
}

}  // namespace bentlight::demo
