#include "optics/autocorrelation.h"

#include <Eigen/Core>
#include <algorithm>
#include <bit>
#include <complex>
#include <stdexcept>

#include "optics/fft.h"

namespace bentlight::optics {

namespace {

// Up to here direct sums are faster than transforms.
constexpr std::size_t most_direct_lags = 48;

std::vector<double> without_mean(std::span<const double> values) {
  double sum = 0.0;
  for (const double value : values) sum += value - values.front();
  const double mean = values.front() + sum / static_cast<double>(values.size());
  std::vector<double> centered(values.size());
  std::ranges::transform(values, centered.begin(), [&](double value) { return value - mean; });
  return centered;
}

/// Sums over t of x[t] x[t + k] for k = 0 … lags, tile by tile so that all lags find the tile in cache.
std::vector<double> lagged_sums_direct(std::span<const double> x, std::size_t lags) {
  constexpr std::size_t tile = 1024;
  std::vector<double> sums(lags + 1, 0.0);
  for (std::size_t first = 0; first < x.size(); first += tile) {
    for (std::size_t lag = 0; lag <= lags && first + lag < x.size(); ++lag) {
      const std::size_t count = std::min(tile, x.size() - lag - first);
      const Eigen::Map<const Eigen::VectorXd> early(x.data() + first, static_cast<Eigen::Index>(count));
      const Eigen::Map<const Eigen::VectorXd> late(x.data() + first + lag, static_cast<Eigen::Index>(count));
      sums[lag] += early.dot(late);
    }
  }
  return sums;
}

/// The same by transforms: each piece of the series against itself and the piece that follows. Products of
/// the spectra are added up and transformed back once.
std::vector<double> lagged_sums_by_fft(std::span<const double> x, std::size_t lags) {
  const std::size_t piece = std::bit_ceil(lags + 1);
  const RealFft fft(2 * piece);
  std::vector<double> padded(fft.length());
  std::vector<std::complex<double>> here(fft.bins()), next(fft.bins()), sum(fft.bins());
  const auto transform = [&](std::size_t first, std::vector<std::complex<double>>& spectrum) {
    std::ranges::fill(padded, 0.0);
    if (first < x.size())
      std::ranges::copy(x.subspan(first, std::min(piece, x.size() - first)), padded.begin());
    fft.forward(padded, spectrum);
  };
  transform(0, here);
  for (std::size_t first = 0; first < x.size(); first += piece) {
    transform(first + piece, next);
    // The next piece stands half the transform's length further on, which turns the sign of every other bin.
    for (std::size_t k = 0; k < sum.size(); ++k) {
      sum[k] += std::conj(here[k]) * (k % 2 == 0 ? here[k] + next[k] : here[k] - next[k]);
    }
    here.swap(next);
  }
  fft.inverse(sum, padded);
  padded.resize(lags + 1);
  for (double& value : padded) value /= static_cast<double>(fft.length());
  return padded;
}

std::vector<double> lagged_sums(std::span<const double> x, std::size_t lags) {
  return lags <= most_direct_lags ? lagged_sums_direct(x, lags) : lagged_sums_by_fft(x, lags);
}

struct GeyerSum {
  double sum = 0.0;     // of (1 - k/T) r_k over k >= 1
  bool is_cut = false;  // whether a pair that is not positive was met
};

GeyerSum initial_positive_sequence(std::span<const double> sums, std::size_t count) {
  GeyerSum found;
  const auto weighted = [&](std::size_t lag) {
    return (1.0 - static_cast<double>(lag) / static_cast<double>(count)) * sums[lag] / sums[0];
  };
  // Pairs begin with r_0 + r_1; r_0 itself is the 1 of the formula and not in the sum.
  for (std::size_t lag = 0; lag + 1 < sums.size(); lag += 2) {
    if (sums[lag] + sums[lag + 1] <= 0.0) return {found.sum, true};
    found.sum += (lag == 0 ? 0.0 : weighted(lag)) + weighted(lag + 1);
  }
  return found;
}

}  // namespace

std::vector<double> autocorrelation(std::span<const double> values, std::size_t max_lag) {
  if (values.size() <= max_lag) throw std::invalid_argument("autocorrelation: more lags than values");
  auto sums = lagged_sums(without_mean(values), max_lag);
  const double square = sums.front();
  for (double& sum : sums) sum = square > 0.0 ? sum / square : 0.0;
  sums.front() = 1.0;
  return sums;
}

double effective_samples(std::span<const double> values) {
  const std::size_t count = values.size();
  if (count < 4) return static_cast<double>(count);
  const auto centered = without_mean(values);
  // Few lags first: most series forget themselves soon. Each further step looks sixteen times as far.
  for (std::size_t lags = most_direct_lags - 1;; lags = 16 * lags + 15) {
    const std::size_t seen = std::min(lags, count - 1);
    const auto sums = lagged_sums(centered, seen);
    if (sums.front() <= 0.0) return static_cast<double>(count);
    const GeyerSum geyer = initial_positive_sequence(sums, count);
    if (geyer.is_cut || seen == count - 1) {
      return static_cast<double>(count) / std::max(1.0 + 2.0 * geyer.sum, 1.0 / static_cast<double>(count));
    }
  }
}

}  // namespace bentlight::optics
