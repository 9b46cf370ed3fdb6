// Units of length for display: SI comes in, what was asked for goes out. One of the two seams where units
// change.
#pragma once

#include <optional>
#include <string>
#include <string_view>

#include "base/error.h"
#include "query/result.h"

namespace bentlight::query {

enum class LengthUnit { m, um, nm, waves, normalised };

/// The name by which a unit is asked for, such as "um".
std::string_view to_text(LengthUnit unit);

/// errors  bad_unit, with the names there are
Expected<LengthUnit> parse_length_unit(std::string_view text);

/// What a view's file states about the light and the flow; some units need some of it.
struct OpticalConditions {
  std::optional<double> wavelength_m = {};
  std::optional<double> density_kg_m3 = {};
  std::optional<double> mach = {};
  std::optional<double> reference_length_m = {};
};

/// Brings every number that holds an optical path length (Unit::opd_power) from metres into `unit`, its
/// interval and its unit's name with it: "m2/Hz" becomes "um2/Hz", "waves2/Hz", or, normalised, "1/Hz". The
/// provenance gains `length_unit`: the unit and, where a condition of the view went into it, which.
///
/// Normalised divides by (density / sea-level density) * Mach number squared * reference length.
///
///   needs   numbers in SI
///   errors  missing_condition when something is to be converted and the file does not state what the unit
///   needs;
///           the result is unchanged then
///   throws  std::invalid_argument when a unit's name does not hold the metres that its opd_power promises
///   source  normalisation of aero-optical distortions on turrets: common practice
Expected<void> convert(Result& result, LengthUnit unit, const OpticalConditions& conditions);

/// `name` with `power` metres in it replaced by another length; an empty `length` takes them away. A unit's
/// name is a product of symbols with blanks between them and powers as digits, then perhaps one slash and
/// another product: "m", "rad2/Hz", "Pa m/Hz". A negative power stands below the slash.
///
///   throws  std::invalid_argument when there are not so many metres in it
std::string with_length(std::string_view name, int power, std::string_view length);

}  // namespace bentlight::query
