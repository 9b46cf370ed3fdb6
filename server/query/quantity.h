// A quantity that has one value per frame: OPD_rms, a mode's coefficient, a companion signal, a point.
#pragma once

#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"
#include "query/analysis.h"
#include "query/prepared.h"

namespace bentlight::query {

enum class QuantityKind { opd_rms, coefficient, signal, point };

struct Quantity {
  QuantityKind kind = QuantityKind::opd_rms;
  std::size_t mode = 0;             // of a coefficient, from 1
  std::string signal;
  std::size_t row = 0, column = 0;  // of a point, in the grid
};

/// The declared parameter `quantity`, with the forms it may have.
Parameter quantity_parameter();

/// opd_rms, piston, tip, tilt, coefficient:K, signal:NAME, point:ROW:COLUMN.
///
///   errors  bad_parameter: an unknown form, a signal that the view has not (the others are listed), a point outside
///           the aperture
Expected<Quantity> parse_quantity(std::string_view text, const Recipe& recipe);

Source source_of_quantity(const Quantity& quantity, const Recipe& recipe);
Expected<Plan> plan_of_quantity(const Quantity& quantity, const Recipe& recipe);

struct QuantitySeries {
  std::vector<double> values;  // [frames of the window]; NaN where a frame is not finite
  Unit unit;
};

/// The quantity in every frame of the window, after the preparation. A mode's coefficient is what the frame holds of it
/// before modes are removed, less its mean over the record when `mean` is removed.
Expected<QuantitySeries> quantity_series(const Quantity& quantity, const Recipe& recipe, Work& work);

}  // namespace bentlight::query
