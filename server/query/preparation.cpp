#include "query/preparation.h"

#include <algorithm>
#include <cmath>

#include <fmt/format.h>

#include "base/text.h"

namespace bentlight::query {

const std::vector<Parameter>& preparation_parameters() {
  static const std::vector<Parameter> parameters = {
      {.name = "from", .unit = "s", .summary = "Start of the window on the view's own clock.", .example = "0.01"},
      {.name = "to", .unit = "s", .summary = "End of the window; a frame at this instant belongs to it.",
       .example = "0.03"},
      {.name = "first", .kind = ParameterKind::whole_number, .unit = "frames",
       .summary = "First frame of the window, counted from 0; instead of `from`.", .low = 0, .high = 1e12,
       .example = "0"},
      {.name = "last", .kind = ParameterKind::whole_number, .unit = "frames",
       .summary = "Last frame of the window, included; instead of `to`.", .low = 0, .high = 1e12, .example = "999"},
      {.name = "aperture", .kind = ParameterKind::text,
       .summary = "Diameter of the aperture: metres, as 0.1, or a share of the view's own, as 80%. "
                  "Without it the view's whole aperture.",
       .pattern = R"([0-9.eE+-]{1,24}%?)", .example = "80%"},
      {.name = "obscuration", .unit = "1", .summary = "Central obscuration as a ratio of diameters.",
       .standard = "0", .low = 0, .high = 0.95, .example = "0.3"},
      {.name = "center", .kind = ParameterKind::text,
       .summary = "Center of the aperture as x,y in metres from the center of the view's own.", .standard = "0,0",
       .pattern = R"([0-9.eE+-]{1,24},[0-9.eE+-]{1,24})"},
      {.name = "remove", .kind = ParameterKind::text,
       .summary = "What is taken out of each frame: any of piston, tilt (both axes), mean (the steady lensing), "
                  "focus, modes:N (the first N of the view's orthonormal modes), or none.",
       .standard = "piston,tilt,mean", .example = "piston,tilt,mean"},
      {.name = "mean_over", .kind = ParameterKind::choice,
       .summary = "Over which frames the steady lensing is averaged when `mean` is removed. The whole record by "
                  "default, so that a frame's values do not change with the window it is looked at through; "
                  "`window` reads the frames.",
       .standard = "record", .choices = {"record", "window"}},
      {.name = "band", .kind = ParameterKind::text, .unit = "Hz",
       .summary = "Band-pass in time as low,high. Not yet offered: it is refused.", .example = "100,5000"},
      {.name = "length_unit", .kind = ParameterKind::choice,
       .summary = "Unit of optical path differences: waves need the view's wavelength; normalised divides by "
                  "(density / 1.225 kg/m3) * Mach number squared * reference length.",
       .standard = "um", .choices = {"um", "nm", "m", "waves", "normalised"}},
  };
  return parameters;
}

namespace {

std::optional<std::string> text_of(const RawParameters& parameters, std::string_view name) {
  const auto found = parameters.find(name);
  return found == parameters.end() ? std::nullopt : std::optional(found->second);
}

/// First frame at or after `instant_s`, as a number from 0 to frames.
std::size_t frame_at_or_after(const archive::WavefrontFile& file, double instant_s) {
  // Instants are compared with a thousandth of a frame of grace: 0.03 s times 10 kHz is not 300 in binary.
  const double grace_s = 1e-3 / file.frame_rate_hz;
  const auto frames = static_cast<std::size_t>(file.map.frames());
  if (!file.time_s.empty()) {
    return static_cast<std::size_t>(std::ranges::lower_bound(file.time_s, instant_s - grace_s) - file.time_s.begin());
  }
  const double frame = std::ceil((instant_s - grace_s) * file.frame_rate_hz);
  return static_cast<std::size_t>(std::clamp(frame, 0.0, static_cast<double>(frames)));
}

Expected<optics::FrameRange> window_of(const RawParameters& parameters, const archive::WavefrontFile& file) {
  const auto frames = static_cast<std::size_t>(file.map.frames());
  const auto from = text_of(parameters, "from"), to = text_of(parameters, "to");
  const auto first = text_of(parameters, "first"), last = text_of(parameters, "last");
  if ((from && first) || (to && last)) {
    return failure(ErrorCode::bad_parameter, "a window is given in seconds (from, to) or in frames (first, last)",
                   from && first ? "first" : "last");
  }
  std::size_t begin = 0, end = frames;
  if (first) begin = static_cast<std::size_t>(*parse_whole_number(*first));
  if (last) end = static_cast<std::size_t>(*parse_whole_number(*last)) + 1;
  if (from) begin = frame_at_or_after(file, *parse_number(*from));
  if (to) end = frame_at_or_after(file, *parse_number(*to) + 2e-3 / file.frame_rate_hz);
  const std::string subject = from ? "from" : to ? "to" : first ? "first" : "last";
  const std::string record = fmt::format("the record holds frames 0 to {}, {} s to {} s", frames - 1,
                                         shortest(file.time_of(0)), shortest(file.time_of(frames - 1)));
  if (last && end > frames) {
    return failure(ErrorCode::empty_window, fmt::format("last={} is past the end: {}", *last, record), "last");
  }
  if (begin >= end || begin >= frames) {
    return failure(ErrorCode::empty_window, "no frame lies in this window: " + record, subject);
  }
  return optics::FrameRange{begin, std::min(end, frames) - begin};
}

Expected<optics::ApertureCut> cut_of(const RawParameters& parameters, const optics::Aperture& native) {
  optics::ApertureCut cut;
  const double native_diameter_m = 2.0 * native.radius_m();
  if (const auto text = text_of(parameters, "aperture")) {
    const bool is_share = text->ends_with('%');
    const auto number = parse_number(is_share ? text->substr(0, text->size() - 1) : *text);
    if (!number || *number <= 0.0) {
      return failure(ErrorCode::bad_parameter, fmt::format("aperture={} is not a diameter", *text), "aperture",
                     {"metres, as 0.1", "a share of the view's own, as 80%"});
    }
    cut.diameter_m = is_share ? *number / 100.0 * native_diameter_m : *number;
  }
  cut.obscuration = *parse_number(parameters.at("obscuration"));
  const auto center = split(parameters.at("center"), ',');
  const auto x = parse_number(center.at(0)), y = parse_number(center.at(1));
  if (!x || !y) return failure(ErrorCode::bad_parameter, "center is not two numbers", "center", {"0.01,0"});
  cut.center_x_m = *x;
  cut.center_y_m = *y;
  const bool is_moved = *x != 0.0 || *y != 0.0;
  // An obscuration or a shift alone means the view's own outline, as a disc.
  if (cut.diameter_m == 0.0 && (cut.obscuration > 0.0 || is_moved)) cut.diameter_m = native_diameter_m;
  return cut;
}

}  // namespace

Expected<Preparation> resolve_preparation(const RawParameters& canonical, const archive::WavefrontFile& file,
                                          const optics::Aperture& native) {
  if (canonical.contains("band")) {
    return failure(ErrorCode::unsupported_preparation, "band-passed frames are not offered yet; leave band out",
                   "band");
  }
  auto window = window_of(canonical, file);
  if (!window) return failure(window);
  auto cut = cut_of(canonical, native);
  if (!cut) return failure(cut);
  auto removal = optics::parse_removal(canonical.at("remove"));
  if (!removal) return failure(removal);
  auto unit = parse_length_unit(canonical.at("length_unit"));
  if (!unit) return failure(unit);
  // Without `mean` among what is removed, what it would be averaged over makes no difference to the question.
  const bool is_over_window = removal->mean && canonical.at("mean_over") == "window" &&
                              *window != optics::FrameRange{0, static_cast<std::size_t>(file.map.frames())};
  return Preparation{.window = *window,
                     .cut = *cut,
                     .removal = *removal,
                     .mean_over = is_over_window ? MeanOver::window : MeanOver::record,
                     .length_unit = *unit};
}

nlohmann::ordered_json canonical_json(const Preparation& preparation) {
  const auto& cut = preparation.cut;
  return {{"first", preparation.window.first},
          {"last", preparation.window.end() - 1},
          {"aperture_diameter_m",
           cut.diameter_m == 0.0 ? nlohmann::ordered_json("whole") : nlohmann::ordered_json(cut.diameter_m)},
          {"obscuration", cut.obscuration},
          {"center_m", {cut.center_x_m, cut.center_y_m}},
          {"remove", optics::to_text(preparation.removal)},
          {"mean_over", preparation.mean_over == MeanOver::record ? "record" : "window"},
          {"length_unit", std::string(to_text(preparation.length_unit))}};
}

}  // namespace bentlight::query
