#include "query/recipe.h"

#include "base/digest.h"
#include "base/text.h"
#include "query/analysis.h"

namespace bentlight::query {

namespace {

nlohmann::ordered_json identity_json(const index::ViewRecord& record) {
  return {{"view", record.id},
          {"size_bytes", record.stamp.size_bytes},
          {"mtime_ns", record.stamp.mtime_ns},
          {"structure", record.metadata_digest}};
}

/// The parameters that are the analysis's own, those of the preparation left out.
nlohmann::ordered_json own_parameters(const RawParameters& parameters) {
  nlohmann::ordered_json own = nlohmann::ordered_json::object();
  for (const auto& [name, text] : parameters) {
    const auto& common = preparation_parameters();
    if (std::ranges::find(common, name, &Parameter::name) == common.end()) own[name] = text;
  }
  return own;
}

std::string digest_of(const nlohmann::ordered_json& canonical) {
  // Half of SHA-256: 128 bits leave no two questions of any archive with one name, and stay readable in an address.
  return sha256_hex(canonical.dump()).substr(0, 32);
}

}  // namespace

const std::string& Recipe::text(std::string_view name) const { return parameters.find(name)->second; }

std::optional<std::string> Recipe::text_if_given(std::string_view name) const {
  const auto found = parameters.find(name);
  return found == parameters.end() ? std::nullopt : std::optional(found->second);
}

double Recipe::number(std::string_view name) const { return parse_number(text(name)).value(); }

std::size_t Recipe::whole_number(std::string_view name) const {
  return static_cast<std::size_t>(parse_whole_number(text(name)).value());
}

Expected<Recipe> recipe_for_view(const Analysis& analysis, std::shared_ptr<const OpenView> view,
                                 const RawParameters& given) {
  const auto accepted = accepted_parameters(analysis, given);
  if (!accepted) return failure(accepted);
  auto parameters = canonical_parameters(*accepted, given);
  if (!parameters) return failure(parameters);
  auto preparation = resolve_preparation(*parameters, view->file, view->native);
  if (!preparation) return failure(preparation);

  Recipe recipe{.analysis = &analysis,
                .subject = view->record.id,
                .parameters = std::move(*parameters),
                .view = view,
                .preparation = std::move(*preparation)};
  recipe.canonical = {{"analysis", analysis.name},
                      {"subject", recipe.subject},
                      {"preparation", canonical_json(*recipe.preparation)},
                      {"parameters", own_parameters(recipe.parameters)},
                      {"inputs", {identity_json(view->record)}},
                      {"software", "bentlight " BENTLIGHT_VERSION}};
  recipe.digest = digest_of(recipe.canonical);
  return recipe;
}

Expected<Recipe> recipe_for_run(const Analysis& analysis, const std::string& run,
                                std::vector<index::ViewRecord> views, const RawParameters& given) {
  const auto accepted = accepted_parameters(analysis, given);
  if (!accepted) return failure(accepted);
  auto parameters = canonical_parameters(*accepted, given);
  if (!parameters) return failure(parameters);

  Recipe recipe{.analysis = &analysis,
                .subject = run,
                .parameters = std::move(*parameters),
                .run_views = std::move(views)};
  nlohmann::ordered_json preparation = nlohmann::ordered_json::object();
  for (const Parameter& common : preparation_parameters()) {
    if (const auto text = recipe.text_if_given(common.name)) preparation[common.name] = *text;
  }
  nlohmann::ordered_json inputs = nlohmann::ordered_json::array();
  for (const auto& record : recipe.run_views) inputs.push_back(identity_json(record));
  recipe.canonical = {{"analysis", analysis.name},
                      {"subject", run},
                      {"preparation", std::move(preparation)},
                      {"parameters", own_parameters(recipe.parameters)},
                      {"inputs", std::move(inputs)},
                      {"software", "bentlight " BENTLIGHT_VERSION}};
  recipe.digest = digest_of(recipe.canonical);
  return recipe;
}

Expected<std::vector<Parameter>> accepted_parameters(const Analysis& analysis, const RawParameters& given) {
  std::vector<Parameter> accepted = preparation_parameters();
  accepted.insert(accepted.end(), analysis.parameters.begin(), analysis.parameters.end());
  if (analysis.more_parameters) {
    const auto more = analysis.more_parameters(given);
    if (!more) return failure(more);
    accepted.insert(accepted.end(), more->begin(), more->end());
  }
  return accepted;
}

std::string_view name(Source source) {
  switch (source) {
    case Source::index:
      return "index";
    case Source::summary:
      return "summary";
    case Source::frames:
      return "frames";
  }
  throw std::logic_error("name: a source without a name");
}

}  // namespace bentlight::query
