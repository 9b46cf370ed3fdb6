#include "query/catalogue.h"

#include <algorithm>

#include <fmt/format.h>
#include <fmt/ranges.h>

#include "query/analyses/analyses.h"

namespace bentlight::query {

Catalogue Catalogue::standard() {
  std::vector<Analysis> analyses = {statistics(), series(), frames()};
  analyses.push_back(field_of_regard(analyses));
  return Catalogue(std::move(analyses));
}

Expected<const Analysis*> Catalogue::find(std::string_view name, SubjectKind subject) const {
  std::vector<std::string> known;
  for (const Analysis& analysis : analyses_) {
    if (analysis.subject != subject) continue;
    if (analysis.name == name) return &analysis;
    known.push_back(analysis.name);
  }
  return failure(ErrorCode::unknown_analysis,
                 fmt::format("there is no analysis {} of a {}; known are {}", name,
                             subject == SubjectKind::view ? "view" : "run", fmt::join(known, ", ")),
                 std::string(name), known);
}

}  // namespace bentlight::query
