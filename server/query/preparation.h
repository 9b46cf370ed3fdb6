// The common preparation: what is done to frames before any analysis.
#pragma once

#include <string>
#include <vector>

#include <nlohmann/json.hpp>

#include "archive/wavefront_file.h"
#include "base/error.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"
#include "optics/removal.h"
#include "query/parameter.h"
#include "query/units.h"

namespace bentlight::query {

/// Over which frames the steady lensing is averaged when `mean` is removed.
enum class MeanOver { record, window };

/// A preparation with every default filled in and every choice resolved against the view it is for.
struct Preparation {
  optics::FrameRange window;
  optics::ApertureCut cut;
  optics::Removal removal;
  MeanOver mean_over = MeanOver::record;
  LengthUnit length_unit = LengthUnit::um;

  /// True when frames of the view's own aperture are asked for.
  bool is_native_aperture() const { return cut.is_whole(); }
};

/// The declared parameters that every analysis of a view takes.
const std::vector<Parameter>& preparation_parameters();

/// Resolves canonical parameter texts against a view.
///
///   errors  bad_parameter, bad_unit, empty_window, unsupported_preparation (band)
Expected<Preparation> resolve_preparation(const RawParameters& canonical, const archive::WavefrontFile& file,
                                          const optics::Aperture& native);

/// The canonical form for recipes and provenance: equal preparations give equal text.
nlohmann::ordered_json canonical_json(const Preparation& preparation);

}  // namespace bentlight::query
