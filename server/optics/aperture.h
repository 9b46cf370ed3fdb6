// The aperture: which points of the grid carry light, and where they lie.
#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

#include "base/error.h"

namespace bentlight::optics {

/// The sampling plane: row-major [rows][columns], rows along y, columns along x, in metres.
struct Grid {
  std::size_t rows = 0;
  std::size_t columns = 0;
  std::vector<double> x_m;         // [columns], ascending
  std::vector<double> y_m;         // [rows], ascending
  std::vector<std::uint8_t> mask;  // [rows * columns], 1 where there is light
};

/// A stretch of neighbouring points in the row-major grid.
struct PointRun {
  std::uint32_t first = 0;  // index into the grid
  std::uint32_t count = 0;
};

/// What a question may cut out of a view's own aperture.
struct ApertureCut {
  double diameter_m = 0.0;   // 0: the whole of the view's own aperture
  double obscuration = 0.0;  // ratio of diameters
  double center_x_m = 0.0;   // relative to the center of the view's own aperture
  double center_y_m = 0.0;
  bool is_whole() const { return *this == ApertureCut{}; }
  bool operator==(const ApertureCut&) const = default;
};

/// The points inside an aperture, in row-major order. "Point p" means the p-th of these everywhere below.
class Aperture {
 public:
  /// errors  degenerate_aperture when the mask holds fewer than three points or all lie on a line
  static Expected<Aperture> of(const Grid& grid);

  /// The part of this aperture inside a disc (or annulus); a point belongs when its center does.
  ///
  ///   errors  aperture_outside_mask when the disc reaches beyond the light (judged by the disc's rim against
  ///           the view's own outline, with one grid step of grace), degenerate_aperture
  Expected<Aperture> cut(const ApertureCut& cut) const;

  std::size_t points() const { return x_m_.size(); }
  std::size_t rows() const { return rows_; }
  std::size_t columns() const { return columns_; }
  std::span<const PointRun> runs() const { return runs_; }
  std::span<const double> x_m() const { return x_m_; }  // [points]
  std::span<const double> y_m() const { return y_m_; }  // [points]
  double center_x_m() const { return center_x_m_; }
  double center_y_m() const { return center_y_m_; }
  double radius_m() const { return radius_m_; }  // of the smallest centered disc that holds the points' cells

  double step_m() const { return step_m_; }  // of the grid

  /// Where this aperture's points stand among those of `whole`, of which it is a part. [points]
  std::vector<std::size_t> positions_in(const Aperture& whole) const;

  /// Scatters `values` [points] onto the grid [rows][columns]; NaN elsewhere.
  std::vector<double> on_grid(std::span<const double> values) const;

 private:
  bool has_light_near(double x_m, double y_m) const;

  std::size_t rows_ = 0, columns_ = 0;
  std::vector<PointRun> runs_;
  std::vector<double> x_m_, y_m_;
  double center_x_m_ = 0.0, center_y_m_ = 0.0, radius_m_ = 0.0, step_m_ = 0.0;
};

}  // namespace bentlight::optics
