// The list of analyses. It is built by main and passed on; nothing registers itself.
#pragma once

#include <vector>

#include "query/analysis.h"

namespace bentlight::query {

class Catalogue {
 public:
  /// Every analysis there is, in the order in which they are shown.
  static Catalogue standard();

  const std::vector<Analysis>& all() const { return analyses_; }

  /// errors  unknown_analysis listing those of that subject
  Expected<const Analysis*> find(std::string_view name, SubjectKind subject) const;

 private:
  explicit Catalogue(std::vector<Analysis> analyses) : analyses_(std::move(analyses)) {}
  std::vector<Analysis> analyses_;
};

}  // namespace bentlight::query
