// Series that forget slowly: the second-order filter behind the demo archive's randomness, and its closed
// forms.
#pragma once

#include <cmath>

#include "demo/scenario.h"

namespace bentlight::demo {

/// x(n) = b x(n-1) + e(n), y(n) = a y(n-1) + x(n), with e scaled so that y has unit variance.
///
///   source   autoregression of second order with the poles a and b (Box & Jenkins, Time Series Analysis);
///   variance
///            and correlation follow from the partial fractions of its spectrum
struct SlowSeries {
  SlowSeries(const Forgetting& forgetting, double step_s)
      : a(std::exp(-step_s / forgetting.long_s)), b(std::exp(-step_s / forgetting.short_s)) {
    renewal = std::sqrt((1.0 - a * a) * (1.0 - b * b) * (1.0 - a * b) / (1.0 + a * b));
    const double x_variance = renewal * renewal / (1.0 - b * b), covariance = x_variance / (1.0 - a * b);
    start_x = std::sqrt(x_variance);
    start_follow = covariance / start_x;
    start_own = std::sqrt(1.0 - start_follow * start_follow);
    long_part = a * (1.0 - b * b) / ((a - b) * (1.0 + a * b));
    short_part = 1.0 - long_part;
  }

  double a, b;
  double renewal;  // standard deviation of e
  // Where it starts in equilibrium, from two unit normals: x = start_x n1, y = start_follow n1 + start_own
  // n2.
  double start_x, start_follow, start_own;
  double long_part, short_part;  // the correlation over n steps is long_part a^n + short_part b^n

  double correlation(double steps) const {
    return long_part * std::pow(a, steps) + short_part * std::pow(b, steps);
  }
};

}  // namespace bentlight::demo
