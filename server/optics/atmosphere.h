// The air the light passes: standard atmosphere, compressible flow, and from where a turret looks at it.
#pragma once

#include "base/error.h"

namespace bentlight::optics {

inline constexpr double heat_capacity_ratio = 1.4;        // of air
inline constexpr double sea_level_density_kg_m3 = 1.225;  // of the standard atmosphere

struct Air {
  double temperature_k = 0.0;
  double pressure_pa = 0.0;
  double density_kg_m3 = 0.0;
  double sound_speed_m_s = 0.0;
};

/// Air at a geopotential altitude from -5 to 20 km.
///
///   errors  bad_parameter on "altitude"
///   source  U.S. Standard Atmosphere, 1976 (NOAA-S/T 76-1562): its two lowest layers, with its constants
Expected<Air> standard_atmosphere(double geopotential_altitude_m);

/// Length by which an OPD_rms is divided to compare runs of different size, speed and altitude:
/// density / sea-level density * Mach number squared * reference length, in metres.
///
///   source  common practice for turrets
struct FlowScale {
  double density_kg_m3 = 0.0;
  double mach = 0.0;
  double reference_length_m = 0.0;
};
double normalising_length_m(const FlowScale& flow);

/// Ratios of total (brought to rest without loss) to static quantities.
///
///   source  isentropic flow of a perfect gas, as in NACA Report 1135 (1953), equations 43 to 45
struct IsentropicRatios {
  double temperature = 1.0;
  double pressure = 1.0;
  double density = 1.0;
};
IsentropicRatios isentropic_ratios(double mach);

/// Where a beam goes with respect to the flow; x downstream, z out of the wall.
struct ViewingAngles {
  double look_back_rad = 0.0;  // from upstream, 0 to pi; above pi/2 the beam looks back through the wake
  double modified_elevation_rad = 0.0;  // about the stream's axis, from the wall, 0 to pi/2 on either side
};

/// Azimuth is 0 looking upstream, elevation counts from the wall: alpha = acos(cos Az cos El),
/// beta = atan(tan El / |sin Az|), and pi/2 on the centreline.
///
///   source  common practice for turrets; both sides of the stream are taken as alike
ViewingAngles viewing_angles(double azimuth_rad, double elevation_rad);

}  // namespace bentlight::optics
