#include "optics/removal.h"

#include <fmt/format.h>

#include <algorithm>
#include <numeric>

#include "base/text.h"

namespace bentlight::optics {

namespace {

constexpr std::string_view modes_prefix = "modes:";

tl::unexpected<Error> refused(std::string_view text) {
  return failure(ErrorCode::bad_parameter, fmt::format("remove does not know \"{}\"", text), "remove",
                 {"piston", "tilt", "mean", "focus",
                  fmt::format("modes:N with N from 1 to {}", most_removed_modes), "none"});
}

Expected<std::vector<std::size_t>> modes_named(std::string_view name) {
  if (name == "piston") return std::vector<std::size_t>{1};
  if (name == "tilt") return std::vector<std::size_t>{2, 3};
  if (name == "focus") return std::vector<std::size_t>{4};
  if (!name.starts_with(modes_prefix)) return refused(name);
  const auto count = parse_whole_number(name.substr(modes_prefix.size()));
  if (!count || *count < 1 || *count > static_cast<long long>(most_removed_modes)) return refused(name);
  std::vector<std::size_t> modes(static_cast<std::size_t>(*count));
  std::iota(modes.begin(), modes.end(), std::size_t{1});
  return modes;
}

/// How many modes from the first on are all there.
std::size_t unbroken(const std::vector<std::size_t>& modes) {
  std::size_t count = 0;
  while (count < modes.size() && modes[count] == count + 1) ++count;
  return count;
}

}  // namespace

bool Removal::has(std::size_t mode) const {
  return std::ranges::binary_search(modes, mode);
}

Expected<Removal> parse_removal(std::string_view text) {
  Removal removal;
  if (text == "none") return removal;
  for (const std::string& name : split(text, ',')) {
    if (name == "mean") {
      removal.mean = true;
      continue;
    }
    const auto modes = modes_named(name);
    if (!modes) return failure(modes);
    removal.modes.insert(removal.modes.end(), modes->begin(), modes->end());
  }
  std::ranges::sort(removal.modes);
  const auto repeated = std::ranges::unique(removal.modes);
  removal.modes.erase(repeated.begin(), repeated.end());
  return removal;
}

std::string to_text(const Removal& removal) {
  std::vector<std::string> names;
  const std::size_t first = unbroken(removal.modes);
  // Two modes are piston and tip alone, which no name but this one says.
  const bool is_counted = first == 2 || first > 3;
  if (is_counted) {
    names.push_back(fmt::format("modes:{}", first));
  } else {
    if (removal.has(1)) names.emplace_back("piston");
    if (removal.has(2)) names.emplace_back("tilt");
  }
  if (first < 4 && removal.has(4)) names.emplace_back("focus");
  if (removal.mean) names.emplace_back("mean");
  return names.empty() ? "none" : fmt::format("{}", fmt::join(names, ","));
}

}  // namespace bentlight::optics
