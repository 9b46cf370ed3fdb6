// The scenario of the demo archive, "wall-dome": a small hemispherical dome on the wall of a wind tunnel,
// measured and computed. All of it is invented, and every number is stated here once; known_answers.json
// repeats them for readers.
#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <string>
#include <vector>

#include "demo/demo_archive.h"

namespace bentlight::demo {

/// The air and the optics, the same for both runs.
struct Setting {
  double mach = 0.45;
  double velocity_m_s = 0.0;  // the following follow from mach, stagnation at 300 K and 101325 Pa
  double density_kg_m3 = 0.0;
  double temperature_k = 0.0;
  double stagnation_temperature_k = 300.0;
  double stagnation_pressure_pa = 101325.0;
  double aperture_diameter_m = 0.15;
  double reference_length_m = 0.30;  // the dome's diameter
  double wavelength_m = 532e-9;
  double gladstone_dale_m3_kg = 2.27e-4;
  double frame_rate_hz = 50e3;
};

/// How a Gaussian series forgets: two first-order filters in a row, whose correlation over a time t is
/// (long e^(-t / long) - short e^(-t / short)) / (long - short). The second filter keeps the lines of the
/// spectrum narrow: one alone would lift the steep spectrum of the random wavefront at high frequencies.
struct Forgetting {
  double long_s = 0.0;
  double short_s = 0.0;
};

/// The random wavefront: plane waves that convect downstream with one speed and slowly forget amplitude and
/// phase.
struct RandomWavefront {
  double outer_scale_m = 0.12;
  double convective_speed_m_s = 0.0;
  Forgetting forgetting = {.long_s = 6e-3, .short_s = 2e-3};  // seen from the moving air
  std::size_t rings = 8;       // of wavenumber, from half of 2 pi / outer scale to 8 waves per aperture
  std::size_t directions = 8;  // in each ring
};

/// One plane wave W = Re(z(t) exp(i (kx x + ky y))); `share` is its part of the variance.
struct Wave {
  double kx_rad_m = 0.0;
  double ky_rad_m = 0.0;
  double share = 0.0;
};

/// The shear layer's roll-up: W = A m(t) cos(2 pi f (x / U_c - t) - psi(t)). Its frequency wanders, which psi
/// sums up, and m = exp(s g - s^2) with a slow Gaussian g makes strong events intermittent; the mean of m^2
/// is 1.
struct RollUp {
  double strouhal = 2.4;  // with reference length and velocity
  double frequency_hz = 0.0;
  double wavelength_m = 0.0;
  double wander_hz = 65.0;  // rms, Gaussian, of first order with the next line's memory
  double wander_memory_s = 1e-3;
  double modulation = 0.4;  // s
  Forgetting modulation_forgetting = {.long_s = 4e-3, .short_s = 1e-3};
};

/// What the tunnel adds and a simulation does not have.
struct TunnelEffects {
  double sensor_noise_m = 12e-9;      // white, rms at each point
  double resolution_m = 1e-6 / 8192;  // the sensor's step; a power of two in um
  double jitter_rad = 2e-6;           // rms of the random part, tip and tilt each
  double jitter_memory_s = 1.5e-3;
  double vibration_rad = 1.5e-6;  // rms of a line in tip
  double vibration_hz = 420.0;
  double piston_m = 0.8e-6;  // rms of a slow drift
  double piston_memory_s = 60e-3;
};

/// Companion signals.
struct SignalLaws {
  double pressure_pa = 180.0;              // rms
  double pressure_coherent_share = 0.8;    // of its variance: the roll-up; the rest is white
  std::size_t pressure_lead_frames = 10;   // the pressure is ahead of the roll-up at the aperture's center
  double acceleration_m_s2 = 0.35;         // rms
  double acceleration_correlation = 0.85;  // with the tip jitter, same instant
};

/// How the disturbance grows with the viewing angle alpha: a logistic step from `low` by `rise` about
/// `center_deg`.
struct AngleLaw {
  double low = 0.0;
  double rise = 0.0;
  double center_deg = 0.0;
  double width_deg = 1.0;
  double at(double alpha_deg) const;
};

struct DeadPatch {
  std::size_t row = 0, column = 0, rows = 0, columns = 0;
  double value_m = 0.35e-6;
};

struct Gap {
  std::size_t before_frame = 0;  // the first frame after the gap
  std::size_t frames = 0;        // missing
};

/// What is wrong with a view on purpose.
struct Flaws {
  std::vector<Gap> gaps;
  std::vector<std::size_t> repeated_frames;  // each holds the same values as the frame before it
  std::vector<std::size_t> nan_frames;
  std::optional<DeadPatch> dead_patch;
  bool none() const { return gaps.empty() && repeated_frames.empty() && nan_frames.empty() && !dead_patch; }
};

enum class Run { tunnel, simulation };

/// The steady lensing as coefficients of Noll's polynomials over the aperture's disc.
struct SteadyLensing {
  double focus_m = 0.0;        // Z4
  double astigmatism_m = 0.0;  // Z6
  double coma_m = 0.0;         // Z8
};

enum class ViewStorage { contiguous, chunked, deflate };

struct View {
  Run run = Run::tunnel;
  std::size_t number = 0;    // within the run
  std::uint64_t stream = 0;  // of random numbers
  double azimuth_deg = 0.0;
  double elevation_deg = 0.0;
  double alpha_deg = 0.0;
  double flow_rms_m = 0.0;     // expected OPD_rms of the flow, piston and tilt removed
  double roll_up_share = 0.0;  // of its square
  SteadyLensing steady;
  Flaws flaws;
  std::string file;  // relative to the archive
  ViewStorage storage = ViewStorage::contiguous;
  int deflate_level = 0;
  bool fletcher32 = false;
  bool chunks_split_frames = false;
};

struct Scenario {
  DemoOptions options;
  Setting setting;
  RandomWavefront random;
  std::vector<Wave> waves;
  RollUp roll_up;
  TunnelEffects tunnel;
  SignalLaws signals;
  AngleLaw flow_rms_m = {.low = 0.05e-6, .rise = 0.20e-6, .center_deg = 105.0, .width_deg = 12.0};
  AngleLaw roll_up_share = {.low = 0.10, .rise = 0.40, .center_deg = 100.0, .width_deg = 8.0};
  AngleLaw simulation_factor = {.low = 0.95, .rise = 0.25, .center_deg = 105.0, .width_deg = 12.0};
  std::vector<View> views;

  double frame_step_s() const { return 1.0 / setting.frame_rate_hz; }
};

inline constexpr const char* campaign_name = "wall-dome";
std::string run_name(Run run);
std::string source_name(Run run);
std::string storage_name(ViewStorage storage);

/// Everything that follows from the options.
Scenario make_scenario(const DemoOptions& options);

}  // namespace bentlight::demo
