// What is taken out of every frame before an analysis.
#pragma once

#include <cstddef>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace bentlight::optics {

inline constexpr std::size_t most_removed_modes = 231;  // all Zernike orders up to 20

struct Removal {
  bool mean = false;               // the steady lensing
  std::vector<std::size_t> modes;  // counted from 1, ascending, each once (optics/modes.h)

  bool has(std::size_t mode) const;
  /// Piston, tip and tilt and nothing else of the modes: what a tracked beam leaves out, and what summaries
  /// hold maps of.
  bool is_plane() const { return modes == std::vector<std::size_t>{1, 2, 3}; }
  std::size_t highest_mode() const { return modes.empty() ? 0 : modes.back(); }
  bool operator==(const Removal&) const = default;
};

/// From a list of piston, tilt (both axes), mean, focus, modes:N (the first N), or none.
///
///   errors  bad_parameter on "remove", with what is accepted
Expected<Removal> parse_removal(std::string_view text);

/// The canonical text: equal removals give equal text, and parse_removal reads it back.
std::string to_text(const Removal& removal);

}  // namespace bentlight::optics
