#include "optics/aperture.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace bentlight::optics {

namespace {

/// The step of a grid along one axis; one point alone has the other axis's step or none.
double step_of(std::span<const double> coordinates) {
  return coordinates.size() < 2
             ? 0.0
             : (coordinates.back() - coordinates.front()) / static_cast<double>(coordinates.size() - 1);
}

bool lie_on_a_line(std::span<const double> x, std::span<const double> y) {
  // The second principal moment vanishes exactly when all points are collinear.
  const auto count = static_cast<double>(x.size());
  double mean_x = 0, mean_y = 0;
  for (std::size_t p = 0; p < x.size(); ++p) mean_x += x[p] / count, mean_y += y[p] / count;
  double xx = 0, xy = 0, yy = 0;
  for (std::size_t p = 0; p < x.size(); ++p) {
    const double dx = x[p] - mean_x, dy = y[p] - mean_y;
    xx += dx * dx, xy += dx * dy, yy += dy * dy;
  }
  return xx * yy - xy * xy <= 1e-12 * (xx + yy) * (xx + yy);
}

}  // namespace

Expected<Aperture> Aperture::of(const Grid& grid) {
  Aperture aperture;
  aperture.rows_ = grid.rows;
  aperture.columns_ = grid.columns;
  for (std::size_t row = 0; row < grid.rows; ++row) {
    bool is_open = false;
    for (std::size_t column = 0; column < grid.columns; ++column) {
      const std::size_t point = row * grid.columns + column;
      const bool is_inside = grid.mask[point] != 0;
      if (is_inside && !is_open) aperture.runs_.push_back({static_cast<std::uint32_t>(point), 0});
      if (is_inside) {
        ++aperture.runs_.back().count;
        aperture.x_m_.push_back(grid.x_m[column]);
        aperture.y_m_.push_back(grid.y_m[row]);
      }
      is_open = is_inside;
    }
  }
  if (aperture.points() < 3 || lie_on_a_line(aperture.x_m_, aperture.y_m_)) {
    return failure(
        ErrorCode::degenerate_aperture,
        fmt::format("an aperture of {} points on a line or fewer than three has no plane to remove",
                    aperture.points()),
        "aperture");
  }
  const auto [x_low, x_high] = std::ranges::minmax(aperture.x_m_);
  const auto [y_low, y_high] = std::ranges::minmax(aperture.y_m_);
  aperture.center_x_m_ = (x_low + x_high) / 2;
  aperture.center_y_m_ = (y_low + y_high) / 2;
  double farthest_m = 0.0;
  for (std::size_t p = 0; p < aperture.points(); ++p) {
    farthest_m = std::max(farthest_m, std::hypot(aperture.x_m_[p] - aperture.center_x_m_,
                                                 aperture.y_m_[p] - aperture.center_y_m_));
  }
  // A point stands for a cell, and the light ends half a step beyond the last center.
  aperture.step_m_ = std::max(step_of(grid.x_m), step_of(grid.y_m));
  aperture.radius_m_ = farthest_m + aperture.step_m_ / 2;
  return aperture;
}

bool Aperture::has_light_near(double x_m, double y_m) const {
  // Points stand row by row, so that y rises: only the few rows within a step are looked at.
  const auto first = std::ranges::lower_bound(y_m_, y_m - step_m_);
  const auto last = std::ranges::upper_bound(y_m_, y_m + step_m_);
  const auto begin = x_m_.begin() + (first - y_m_.begin());
  return std::any_of(begin, begin + std::max<std::ptrdiff_t>(0, last - first),
                     [&](double x) { return std::abs(x - x_m) <= step_m_; });
}

Expected<Aperture> Aperture::cut(const ApertureCut& cut) const {
  if (cut.is_whole()) return *this;
  const double outer_m = cut.diameter_m > 0.0 ? cut.diameter_m / 2 : radius_m_;
  const double inner_m = cut.obscuration * outer_m;
  const double x0_m = center_x_m_ + cut.center_x_m, y0_m = center_y_m_ + cut.center_y_m;

  // The rim, one step inside, must have light all along; struts may shade a fiftieth of it.
  constexpr int rim_places = 256;
  int dark_places = 0;
  for (int i = 0; i < rim_places; ++i) {
    const double angle = 2 * std::numbers::pi * i / rim_places;
    const double reach_m = std::max(0.0, outer_m - step_m_);
    dark_places += !has_light_near(x0_m + reach_m * std::cos(angle), y0_m + reach_m * std::sin(angle));
  }
  if (dark_places > rim_places / 50) {
    return failure(
        ErrorCode::aperture_outside_mask,
        fmt::format(
            "an aperture of {} m at ({}, {}) m reaches beyond the light, which has a diameter of {} m",
            2 * outer_m, cut.center_x_m, cut.center_y_m, 2 * radius_m_),
        "aperture");
  }

  Grid grid{.rows = rows_, .columns = columns_, .mask = std::vector<std::uint8_t>(rows_ * columns_, 0)};
  grid.x_m.assign(columns_, 0.0);
  grid.y_m.assign(rows_, 0.0);
  const double grace_m = 1e-9 * outer_m;  // a center on the rim belongs, whatever its last bit
  std::size_t point = 0;
  for (const PointRun& run : runs_) {
    for (std::uint32_t i = 0; i < run.count; ++i, ++point) {
      const std::size_t place = run.first + i;
      grid.x_m[place % columns_] = x_m_[point];
      grid.y_m[place / columns_] = y_m_[point];
      const double distance_m = std::hypot(x_m_[point] - x0_m, y_m_[point] - y0_m);
      grid.mask[place] = distance_m <= outer_m + grace_m && distance_m >= inner_m - grace_m;
    }
  }
  auto inside = Aperture::of(grid);
  if (!inside) return inside;
  inside->center_x_m_ = x0_m;
  inside->center_y_m_ = y0_m;
  inside->radius_m_ = outer_m;
  inside->step_m_ = step_m_;
  return inside;
}

std::vector<std::size_t> Aperture::positions_in(const Aperture& whole) const {
  std::vector<std::size_t> position_of(rows_ * columns_, 0);
  std::size_t point = 0;
  for (const PointRun& run : whole.runs_) {
    for (std::uint32_t i = 0; i < run.count; ++i) position_of[run.first + i] = point++;
  }
  std::vector<std::size_t> positions;
  positions.reserve(points());
  for (const PointRun& run : runs_) {
    for (std::uint32_t i = 0; i < run.count; ++i) positions.push_back(position_of[run.first + i]);
  }
  return positions;
}

std::vector<double> Aperture::on_grid(std::span<const double> values) const {
  std::vector<double> grid(rows_ * columns_, std::numeric_limits<double>::quiet_NaN());
  std::size_t point = 0;
  for (const PointRun& run : runs_) {
    for (std::uint32_t i = 0; i < run.count; ++i) grid[run.first + i] = values[point++];
  }
  return grid;
}

}  // namespace bentlight::optics
