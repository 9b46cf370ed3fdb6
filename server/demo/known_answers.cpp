#include "demo/known_answers.h"

#include <fmt/format.h>

#include <cmath>

#include "demo/view_writer.h"

namespace bentlight::demo {

namespace {

using Json = nlohmann::ordered_json;

Json options_json(const DemoOptions& options) {
  return {{"views_per_run", options.views_per_run},
          {"frames", options.frames},
          {"grid", options.grid},
          {"seed", options.seed}};
}

Json conditions_json(const Setting& setting) {
  return {{"gas", "perfect, gamma 1.4, R 287.05287 J/(kg K), isentropic from rest"},
          {"stagnation_temperature_k", setting.stagnation_temperature_k},
          {"stagnation_pressure_pa", setting.stagnation_pressure_pa},
          {"mach", setting.mach},
          {"velocity_m_s", setting.velocity_m_s},
          {"density_kg_m3", setting.density_kg_m3},
          {"temperature_k", setting.temperature_k},
          {"aperture_diameter_m", setting.aperture_diameter_m},
          {"reference_length_m", setting.reference_length_m},
          {"wavelength_m", setting.wavelength_m},
          {"gladstone_dale_m3_kg", setting.gladstone_dale_m3_kg},
          {"frame_rate_hz", setting.frame_rate_hz}};
}

Json random_json(const Scenario& scenario) {
  const RandomWavefront& random = scenario.random;
  Json waves = Json::array();
  for (const Wave& wave : scenario.waves) {
    waves.push_back({{"kx_rad_m", wave.kx_rad_m}, {"ky_rad_m", wave.ky_rad_m}, {"share", wave.share}});
  }
  return {
      {"law",
       "plane waves Re(z(t) exp(i (kx x + ky y))), shares of the variance drawn from the plane spectrum "
       "(k^2 + k0^2)^(-11/6) with k0 = 2 pi / outer scale; the correlation of each z over a time t is "
       "(a exp(-t / a) - b exp(-t / b)) / (a - b) exp(-i kx U_c t) with a and b the forgetting times, so a "
       "point's spectrum is a sum of narrow lines at kx U_c / (2 pi)"},
      {"outer_scale_m", random.outer_scale_m},
      {"convective_speed_m_s", random.convective_speed_m_s},
      {"convective_direction", "along +x"},
      {"forgetting_s", {random.forgetting.long_s, random.forgetting.short_s}},
      {"waves", std::move(waves)}};
}

Json roll_up_json(const RollUp& roll_up) {
  return {
      {"law",
       "A m(t) cos(2 pi f (x / U_c - t) - psi(t)); m = exp(s g - s^2) with s the modulation, g a unit "
       "Gaussian "
       "series that forgets like the waves, so the mean of m^2 is 1; psi sums up a Gaussian wander of the "
       "frequency with correlation exp(-t / wander_memory_s)"},
      {"strouhal", roll_up.strouhal},
      {"frequency_hz", roll_up.frequency_hz},
      {"wavelength_m", roll_up.wavelength_m},
      {"wander_hz", roll_up.wander_hz},
      {"wander_memory_s", roll_up.wander_memory_s},
      {"modulation", roll_up.modulation},
      {"modulation_forgetting_s",
       {roll_up.modulation_forgetting.long_s, roll_up.modulation_forgetting.short_s}}};
}

Json law_json(const AngleLaw& law) {
  return {{"low", law.low}, {"rise", law.rise}, {"center_deg", law.center_deg}, {"width_deg", law.width_deg}};
}

Json angle_laws_json(const Scenario& scenario) {
  return {
      {"law",
       "low + rise / (1 + exp(-(alpha - center_deg) / width_deg)), alpha = acos(cos azimuth cos elevation)"},
      {"flow_rms_m", law_json(scenario.flow_rms_m)},
      {"roll_up_share", law_json(scenario.roll_up_share)},
      {"simulation_factor", law_json(scenario.simulation_factor)},
      {"meaning",
       "flow_rms_m is the expected OPD_rms (root of the mean square over time and points) of the flow in the "
       "tunnel, piston and tilt removed from every frame; roll_up_share is the roll-up's part of its square, "
       "the "
       "random wavefront has the rest; the simulation's flow_rms_m is larger by simulation_factor"}};
}

Json tunnel_json(const TunnelEffects& tunnel) {
  return {{"sensor_noise_m", tunnel.sensor_noise_m},
          {"resolution_m", tunnel.resolution_m},
          {"jitter_rad", tunnel.jitter_rad},
          {"jitter_memory_s", tunnel.jitter_memory_s},
          {"vibration_rad", tunnel.vibration_rad},
          {"vibration_hz", tunnel.vibration_hz},
          {"vibration_axis", "tip (path grows along x)"},
          {"piston_m", tunnel.piston_m},
          {"piston_memory_s", tunnel.piston_memory_s}};
}

Json signals_json(const Scenario& scenario) {
  const SignalLaws& signals = scenario.signals;
  return {
      {"surface_pressure",
       {{"unit", "Pa"},
        {"rms", signals.pressure_pa},
        {"coherent_share", signals.pressure_coherent_share},
        {"lead_time_s", static_cast<double>(signals.pressure_lead_frames) * scenario.frame_step_s()},
        {"lead_frames", signals.pressure_lead_frames},
        {"meaning",
         "the roll-up at the aperture's center, lead_time_s later, plus white noise; both runs. Where the "
         "correlation is sought, look within half a period of the roll-up"}}},
      {"accelerometer",
       {{"unit", "m/s2"},
        {"rms", signals.acceleration_m_s2},
        {"correlation_with_tip_jitter", signals.acceleration_correlation},
        {"meaning", "the tracker's tip jitter at the same instant plus white noise; tunnel only"}}}};
}

Json flaws_json(const Flaws& flaws) {
  Json json = Json::object();
  for (const Gap& gap : flaws.gaps) {
    json["gaps"].push_back({{"before_frame", gap.before_frame}, {"missing_frames", gap.frames}});
  }
  if (!flaws.repeated_frames.empty()) json["repeated_frames"] = flaws.repeated_frames;
  if (!flaws.nan_frames.empty()) json["nan_frames"] = flaws.nan_frames;
  if (flaws.dead_patch) {
    const DeadPatch& patch = *flaws.dead_patch;
    json["dead_patch"] = {{"first_row", patch.row},
                          {"first_column", patch.column},
                          {"rows", patch.rows},
                          {"columns", patch.columns},
                          {"value_m", patch.value_m}};
  }
  return json;
}

Json storage_json(const View& view, const DemoOptions& options) {
  Json json = {{"kind", storage_name(view.storage)}};
  if (view.storage == ViewStorage::contiguous) return json;
  const std::size_t across = view.chunks_split_frames ? (options.grid + 1) / 2 : options.grid;
  json["chunk"] = {chunk_frames(options), across, across};
  if (view.storage == ViewStorage::deflate) {
    json["deflate_level"] = view.deflate_level;
    json["shuffle"] = true;
    json["fletcher32"] = view.fletcher32;
  }
  return json;
}

/// A dead patch follows neither piston nor tilt, so nothing simple is true of the whole aperture any more.
Json expected_json(const View& view, const Expectation& expectation) {
  if (view.flaws.dead_patch) return nullptr;
  return {{"opd_rms_overall_m", expectation.opd_rms_m},
          {"opd_rms_overall_standard_error_m", expectation.opd_rms_standard_error_m},
          {"opd_rms_overall_with_mean_m", expectation.opd_rms_with_mean_m},
          {"steady_lensing_rms_m", expectation.steady_rms_m},
          {"noise_rms_m", expectation.noise_rms_m},
          {"tip_rms_rad", expectation.tip_rms_rad},
          {"tilt_rms_rad", expectation.tilt_rms_rad}};
}

Json view_json(const View& view, const Scenario& scenario, const ExpectedStatistics& statistics) {
  const std::size_t frames = scenario.options.frames - view.flaws.nan_frames.size();
  return {{"file", view.file},
          {"run", run_name(view.run)},
          {"azimuth_deg", view.azimuth_deg},
          {"elevation_deg", view.elevation_deg},
          {"alpha_deg", view.alpha_deg},
          {"flow_rms_m", view.flow_rms_m},
          {"roll_up_share", view.roll_up_share},
          {"steady_lensing_noll_m",
           {{"focus_4", view.steady.focus_m},
            {"astigmatism_6", view.steady.astigmatism_m},
            {"coma_8", view.steady.coma_m}}},
          {"storage", storage_json(view, scenario.options)},
          {"unit", view.run == Run::tunnel ? "um" : "m"},
          {"flaws", flaws_json(view.flaws)},
          {"expected", expected_json(view, statistics.of(view, frames))}};
}

}  // namespace

nlohmann::ordered_json known_answers(const Scenario& scenario,
                                     const DemoGrid& grid,
                                     const ExpectedStatistics& statistics) {
  Json views = Json::array();
  for (const View& view : scenario.views) views.push_back(view_json(view, scenario, statistics));
  return {
      {"generator", generator_name},
      {"format", 1},
      {"version", BENTLIGHT_VERSION},
      {"options", options_json(scenario.options)},
      {"campaign", campaign_name},
      {"conditions", conditions_json(scenario.setting)},
      {"grid", {{"across", grid.across}, {"step_m", grid.step_m}, {"points_in_aperture", grid.points}}},
      {"random_wavefront", random_json(scenario)},
      {"roll_up", roll_up_json(scenario.roll_up)},
      {"angle_laws", angle_laws_json(scenario)},
      {"tunnel", tunnel_json(scenario.tunnel)},
      {"signals", signals_json(scenario)},
      {"expected_meaning",
       "expectations over all archives that other seeds would give, from the closed form of the synthesis; "
       "one "
       "archive scatters about opd_rms_overall_m by its standard error. null where a dead patch lies in the "
       "aperture"},
      {"views", std::move(views)}};
}

std::string readme(const Scenario& scenario) {
  const Setting& setting = scenario.setting;
  std::string text = fmt::format(
      "A demo archive, written by `bentlight demo` with seed {}. Nothing in it was measured.\n\n"
      "The scenario: a hemispherical dome of {} m on the wall of a wind tunnel at Mach {}, seen through an "
      "aperture\n"
      "of {} m at {} viewing angles, once in the tunnel ({}) and once computed ({}).\n"
      "{} frames a view at {:.0f} kHz, {} x {} points.\n\n"
      "What is true of it, in short; known_answers.json has every number:\n\n",
      scenario.options.seed, setting.reference_length_m, setting.mach, setting.aperture_diameter_m,
      scenario.options.views_per_run, run_name(Run::tunnel), run_name(Run::simulation),
      scenario.options.frames, setting.frame_rate_hz * 1e-3, scenario.options.grid, scenario.options.grid);
  text += fmt::format("  convective speed         {:.2f} m/s, along +x (the stream has {:.2f} m/s)\n",
                      scenario.random.convective_speed_m_s, setting.velocity_m_s);
  text +=
      fmt::format("  shear-layer roll-up      Strouhal {} = {:.1f} Hz, wavelength {:.4f} m\n",
                  scenario.roll_up.strouhal, scenario.roll_up.frequency_hz, scenario.roll_up.wavelength_m);
  const AngleLaw& law = scenario.flow_rms_m;
  text += fmt::format(
      "  OPD_rms of the flow      {:.3f} um + {:.3f} um / (1 + exp(-(alpha - {} deg) / {} deg)), alpha the "
      "look-back\n"
      "                           angle; piston and tilt removed; sensor noise adds in squares\n",
      law.low * 1e6, law.rise * 1e6, law.center_deg, law.width_deg);
  text += fmt::format("  simulation against it    {:.2f} times looking upstream, {:.2f} times looking back\n",
                      scenario.simulation_factor.low,
                      scenario.simulation_factor.low + scenario.simulation_factor.rise);
  text += fmt::format("  sensor noise (tunnel)    {:.1f} nm rms at each point\n",
                      scenario.tunnel.sensor_noise_m * 1e9);
  text += fmt::format(
      "  tracker jitter (tunnel)  {:.1f} urad rms each way, and a line of {:.1f} urad rms at {} Hz in tip\n",
      scenario.tunnel.jitter_rad * 1e6, scenario.tunnel.vibration_rad * 1e6, scenario.tunnel.vibration_hz);
  text +=
      fmt::format("  surface pressure         ahead of the roll-up by {:.2f} ms\n",
                  1e3 * static_cast<double>(scenario.signals.pressure_lead_frames) * scenario.frame_step_s());
  text += "\nViews that are flawed on purpose:\n\n";
  for (const View& view : scenario.views) {
    if (!view.flaws.none()) text += fmt::format("  {}  {}\n", view.file, flaws_json(view.flaws).dump());
  }
  return text;
}

}  // namespace bentlight::demo
