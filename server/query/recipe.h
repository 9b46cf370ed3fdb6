// A recipe is one question in canonical form. Its digest is cache key, ETag and job identity in one: equal questions
// meet without anyone comparing them.
#pragma once

#include <memory>
#include <optional>
#include <string>
#include <vector>

#include <nlohmann/json.hpp>

#include "index/index.h"
#include "query/open_view.h"
#include "query/parameter.h"
#include "query/preparation.h"

namespace bentlight::query {

struct Analysis;

struct Recipe {
  const Analysis* analysis = nullptr;
  std::string subject;                      // the view's or the run's id
  RawParameters parameters;                 // canonical, defaults filled in, the preparation's included
  std::shared_ptr<const OpenView> view;     // for questions about a view
  std::optional<Preparation> preparation;   // for questions about a view
  std::vector<index::ViewRecord> run_views;  // for questions about a run, in the index's order
  nlohmann::ordered_json canonical;
  std::string digest;                       // 32 hexadecimal digits

  /// The canonical text of a declared parameter with a default.
  const std::string& text(std::string_view name) const;
  std::optional<std::string> text_if_given(std::string_view name) const;
  double number(std::string_view name) const;
  std::size_t whole_number(std::string_view name) const;
};

/// Understands a question about a view. errors  those of canonical_parameters and resolve_preparation
Expected<Recipe> recipe_for_view(const Analysis& analysis, std::shared_ptr<const OpenView> view,
                                 const RawParameters& given);

/// Understands a question about a run. `inner` declares the parameters of the analysis that is asked of each view.
Expected<Recipe> recipe_for_run(const Analysis& analysis, const std::string& run,
                                std::vector<index::ViewRecord> views, const RawParameters& given);

}  // namespace bentlight::query
