#include "demo/scenario.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "demo/normal_numbers.h"

namespace bentlight::demo {

namespace {

constexpr double pi = std::numbers::pi;
constexpr std::uint64_t wave_stream = 1;  // views use numbers from 1024 on
constexpr std::uint64_t first_view_stream = 1024;

/// Perfect gas with gamma = 1.4 and R = 287.05287 J/(kg K), isentropic from rest (methods 1.8 and 1.9).
Setting setting_in_air() {
  Setting setting;
  constexpr double gas_constant = 287.05287;
  const double ratio = 1.0 + 0.2 * setting.mach * setting.mach;
  setting.temperature_k = setting.stagnation_temperature_k / ratio;
  setting.density_kg_m3 =
      setting.stagnation_pressure_pa / std::pow(ratio, 3.5) / (gas_constant * setting.temperature_k);
  setting.velocity_m_s = setting.mach * std::sqrt(1.4 * gas_constant * setting.temperature_k);
  return setting;
}

/// Waves drawn evenly from a plane spectrum (k^2 + k0^2)^(-11/6), k0 = 2 pi / outer scale: rings of equal
/// width in log k, each cut into equal directions of the half plane kx > 0, one wave somewhere in each field.
/// The energy of a ring is the integral of the spectrum times k, which is proportional to (k^2 +
/// k0^2)^(-5/6).
std::vector<Wave> drawn_waves(const RandomWavefront& random, double diameter_m, std::uint64_t seed) {
  const double outer = 2.0 * pi / random.outer_scale_m;
  const double least = 0.5 * outer, greatest = 8.0 * 2.0 * pi / diameter_m;
  const auto edge = [&](double ring) {
    return least * std::pow(greatest / least, ring / static_cast<double>(random.rings));
  };
  const auto energy_beyond = [&](double k) { return std::pow(k * k + outer * outer, -5.0 / 6.0); };
  const double total = energy_beyond(least) - energy_beyond(greatest);
  std::vector<Wave> waves;
  for (std::size_t ring = 0; ring < random.rings; ++ring) {
    const double from = static_cast<double>(ring);
    const double share = (energy_beyond(edge(from)) - energy_beyond(edge(from + 1.0))) / total;
    for (std::size_t direction = 0; direction < random.directions; ++direction) {
      const double k = edge(from + uniform_number(seed, wave_stream, 2 * waves.size()));
      const double across =
          static_cast<double>(direction) + uniform_number(seed, wave_stream, 2 * waves.size() + 1);
      const double angle = pi * (across / static_cast<double>(random.directions) - 0.5);
      waves.push_back({.kx_rad_m = k * std::cos(angle),
                       .ky_rad_m = k * std::sin(angle),
                       .share = share / static_cast<double>(random.directions)});
    }
  }
  return waves;
}

struct Angle {
  double azimuth_deg, elevation_deg;
};

double to_tenth(double degrees) {
  return std::round(degrees * 10.0) / 10.0;
}

/// `count` viewing angles on a grid of azimuth (30 to 155 degrees) and elevation (15 to 60 degrees), azimuth
/// fastest.
std::vector<Angle> viewing_angles(std::size_t count) {
  const auto rows =
      static_cast<std::size_t>(std::max(1.0, std::round(std::sqrt(static_cast<double>(count) / 1.5))));
  const std::size_t columns = (count + rows - 1) / rows;
  const auto between = [](double from, double to, std::size_t i, std::size_t n) {
    return n == 1 ? 0.5 * (from + to)
                  : from + (to - from) * static_cast<double>(i) / static_cast<double>(n - 1);
  };
  std::vector<Angle> angles;
  for (std::size_t i = 0; i < count; ++i) {
    angles.push_back({.azimuth_deg = to_tenth(between(30.0, 155.0, i % columns, columns)),
                      .elevation_deg = to_tenth(between(15.0, 60.0, i / columns, rows))});
  }
  return angles;
}

/// Three digits, and a tenth only where there is one: names sort by angle.
std::string angle_text(double degrees, int digits) {
  const auto tenths = static_cast<int>(std::lround(degrees * 10.0));
  std::string text = fmt::format("{:0{}d}", tenths / 10, digits);
  if (tenths % 10 != 0) text += fmt::format(".{}", tenths % 10);
  return text;
}

Flaws planned_flaws(std::size_t number, const DemoOptions& options) {
  const std::size_t frames = options.frames;
  Flaws flaws;
  if (number == 1) {
    flaws.gaps = {{.before_frame = frames / 3, .frames = 7}, {.before_frame = 2 * frames / 3, .frames = 1}};
    flaws.repeated_frames = {frames / 4, frames / 2};
  }
  if (number == 2) {
    const std::size_t size = std::max<std::size_t>(2, options.grid / 16);
    flaws.dead_patch =
        DeadPatch{.row = options.grid / 3, .column = options.grid / 2, .rows = size, .columns = size};
  }
  if (number == 3) flaws.nan_frames = {frames / 5, frames / 5 + 1, frames / 5 + 2, frames / 2};
  return flaws;
}

void choose_storage(View& view, DemoStorage storage) {
  const bool tunnel = view.run == Run::tunnel;
  switch (storage) {
    case DemoStorage::contiguous:
      view.storage = ViewStorage::contiguous;
      return;
    case DemoStorage::chunked:
      view.storage = ViewStorage::chunked;
      return;
    case DemoStorage::deflate:
      view.storage = ViewStorage::deflate;
      view.deflate_level = 1;
      return;
    case DemoStorage::mixed:
      view.storage = tunnel ? ViewStorage::deflate : ViewStorage::contiguous;
      view.deflate_level = tunnel ? 1 + static_cast<int>(view.number % 4) : 0;
      view.chunks_split_frames = tunnel && view.number % 8 == 5;
      view.fletcher32 = tunnel && view.number == 6;
      if (tunnel && view.number % 8 == 7) view.storage = ViewStorage::chunked;
      return;
  }
}

View planned_view(const Scenario& scenario, Run run, std::size_t number, const Angle& angle) {
  View view;
  view.run = run;
  view.number = number;
  view.azimuth_deg = angle.azimuth_deg;
  view.elevation_deg = angle.elevation_deg;
  view.stream = first_view_stream * (2 * number + (run == Run::tunnel ? 1 : 2));
  const double azimuth = angle.azimuth_deg * pi / 180.0, elevation = angle.elevation_deg * pi / 180.0;
  const double alpha = std::acos(std::cos(azimuth) * std::cos(elevation));
  view.alpha_deg = alpha * 180.0 / pi;
  const double factor = run == Run::simulation ? scenario.simulation_factor.at(view.alpha_deg) : 1.0;
  view.flow_rms_m = factor * scenario.flow_rms_m.at(view.alpha_deg);
  view.roll_up_share = scenario.roll_up_share.at(view.alpha_deg);
  view.steady = {.focus_m = 0.25e-6 + 0.15e-6 * std::cos(alpha),
                 .astigmatism_m = 0.12e-6 * std::cos(elevation),
                 .coma_m = 0.08e-6 * std::sin(alpha)};
  if (run == Run::tunnel) view.flaws = planned_flaws(number, scenario.options);
  view.file = fmt::format("{}/{}/az{}_el{}.h5", campaign_name, run_name(run),
                          angle_text(angle.azimuth_deg, 3), angle_text(angle.elevation_deg, 2));
  choose_storage(view, scenario.options.storage);
  return view;
}

}  // namespace

double AngleLaw::at(double alpha_deg) const {
  return low + rise / (1.0 + std::exp(-(alpha_deg - center_deg) / width_deg));
}

std::string run_name(Run run) {
  return run == Run::tunnel ? "tunnel-m045" : "les-m045";
}
std::string source_name(Run run) {
  return run == Run::tunnel ? "tunnel" : "simulation";
}

std::string storage_name(ViewStorage storage) {
  switch (storage) {
    case ViewStorage::contiguous:
      return "contiguous";
    case ViewStorage::chunked:
      return "chunked";
    case ViewStorage::deflate:
      return "deflate";
  }
  return {};
}

Scenario make_scenario(const DemoOptions& options) {
  Scenario scenario;
  scenario.options = options;
  scenario.setting = setting_in_air();
  const Setting& setting = scenario.setting;
  scenario.random.convective_speed_m_s = 0.65 * setting.velocity_m_s;
  scenario.waves = drawn_waves(scenario.random, setting.aperture_diameter_m, options.seed);
  scenario.roll_up.frequency_hz =
      scenario.roll_up.strouhal * setting.velocity_m_s / setting.reference_length_m;
  scenario.roll_up.wavelength_m = scenario.random.convective_speed_m_s / scenario.roll_up.frequency_hz;
  const auto angles = viewing_angles(options.views_per_run);
  for (std::size_t i = 0; i < angles.size(); ++i) {
    scenario.views.push_back(planned_view(scenario, Run::tunnel, i, angles[i]));
    scenario.views.push_back(planned_view(scenario, Run::simulation, i, angles[i]));
  }
  return scenario;
}

}  // namespace bentlight::demo
