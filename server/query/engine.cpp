#include "query/engine.h"

#include <fmt/format.h>

#include "query/units.h"

namespace bentlight::query {

namespace {

// How long a question within the interactive budget is waited for before it becomes a visible job: longer than any
// such question takes, shorter than proxies wait.
constexpr std::chrono::seconds interactive_patience{20};

OpticalConditions conditions_of(const index::ViewRecord& record) {
  return {.wavelength_m = record.wavelength_m,
          .density_kg_m3 = record.density_kg_m3,
          .mach = record.mach,
          .reference_length_m = record.reference_length_m};
}

}  // namespace

Engine::Engine(EngineParts parts)
    : parts_(parts),
      ask_([this](const std::string& view, const std::string& analysis, const RawParameters& parameters,
                  WorkPool& pool, const std::stop_token& stop) { return ask(view, analysis, parameters, pool, stop); }) {}

Expected<Recipe> Engine::view_recipe(const std::string& view, const std::string& analysis,
                                     const RawParameters& given) const {
  const auto declared = parts_.catalogue.find(analysis, SubjectKind::view);
  if (!declared) return failure(declared);
  auto open = parts_.shelf.open(view);
  if (!open) return failure(open);
  return recipe_for_view(**declared, std::move(*open), given);
}

Expected<Recipe> Engine::run_recipe(const std::string& run, const std::string& analysis,
                                    const RawParameters& given) const {
  const auto declared = parts_.catalogue.find(analysis, SubjectKind::run);
  if (!declared) return failure(declared);
  if (const auto known = parts_.index.run(run); !known) return failure(known);
  auto views = parts_.index.views_of_run(run);
  if (!views) return failure(views);
  return recipe_for_run(**declared, run, std::move(*views), given);
}

Expected<Recipe> Engine::recipe_of(const std::string& digest) const {
  const auto question = parts_.book.find(digest);
  if (!question) return failure(question);
  auto recipe = question->is_about_run ? run_recipe(question->subject, question->analysis, question->parameters)
                                       : view_recipe(question->subject, question->analysis, question->parameters);
  if (!recipe) return recipe;
  if (recipe->digest != digest) {
    return failure(ErrorCode::file_changed,
                   fmt::format("the inputs of this result have changed since; the same question is now {}",
                               recipe->digest),
                   question->subject);
  }
  return recipe;
}

Expected<Plan> Engine::plan(const Recipe& recipe) const { return recipe.analysis->plan(recipe); }

Expected<Answer> Engine::answer(const Recipe& recipe, std::chrono::milliseconds patience) {
  if (auto result = parts_.cache.find(recipe.digest)) return Answer{.result = std::move(result), .digest = recipe.digest};
  const auto plan = recipe.analysis->plan(recipe);
  if (!plan) return failure(plan);
  const auto ticket = parts_.jobs.join(
      recipe.digest, recipe.analysis->name, recipe.subject, *plan,
      [this, recipe](WorkPool& pool, const std::stop_token& stop, Progress& progress) {
        return compute(recipe, pool, stop, progress);
      });
  if (!ticket) return failure(ticket);
  const auto outcome =
      ticket->job->wait(ticket->is_long ? patience : std::max<std::chrono::milliseconds>(patience, interactive_patience));
  if (!outcome) return Answer{.job = ticket->job, .digest = recipe.digest};
  if (!*outcome) return failure(*outcome);
  return Answer{.result = **outcome, .job = ticket->job, .digest = recipe.digest};
}

Expected<std::shared_ptr<const Result>> Engine::compute(const Recipe& recipe, WorkPool& pool,
                                                        const std::stop_token& stop, Progress& progress) {
  const auto plan = recipe.analysis->plan(recipe);
  if (!plan) return failure(plan);
  Work work{.pool = pool, .stop = stop, .progress = progress, .ask = ask_};
  auto result = recipe.analysis->compute(recipe, work);
  if (!result) return failure(result);
  if (recipe.preparation) {
    const auto converted =
        convert(*result, recipe.preparation->length_unit, conditions_of(recipe.view->record));
    if (!converted) return failure(converted);
  }
  auto kept = finished(recipe, *plan, std::move(*result));
  // A full state disk costs speed next time, not the answer now; the cache counts it for the metrics.
  if (auto stored = parts_.cache.keep(recipe.digest, kept); !stored) {
    parts_.log.warning("result-not-cached", {{"digest", recipe.digest}, {"reason", stored.error().text}});
  }
  if (auto noted = parts_.book.keep(recipe); !noted) {
    parts_.log.warning("recipe-not-kept", {{"digest", recipe.digest}, {"reason", noted.error().text}});
  }
  return kept;
}

std::shared_ptr<const Result> Engine::finished(const Recipe& recipe, const Plan& plan, Result result) const {
  result.analysis = recipe.analysis->name;
  result.subject = recipe.subject;
  nlohmann::ordered_json provenance = {{"digest", recipe.digest},
                                       {"permalink", "/v1/results/" + recipe.digest},
                                       {"software", recipe.canonical["software"]},
                                       {"preparation", recipe.canonical["preparation"]},
                                       {"parameters", recipe.canonical["parameters"]},
                                       {"inputs", recipe.canonical["inputs"]},
                                       {"source", std::string(name(plan.source))},
                                       {"method", recipe.analysis->method}};
  provenance.update(result.provenance);
  result.provenance = std::move(provenance);
  return std::make_shared<const Result>(std::move(result));
}

Expected<std::shared_ptr<const Result>> Engine::ask(const std::string& view, const std::string& analysis,
                                                    const RawParameters& parameters, WorkPool& pool,
                                                    const std::stop_token& stop) {
  const auto recipe = view_recipe(view, analysis, parameters);
  if (!recipe) return failure(recipe);
  if (auto result = parts_.cache.find(recipe->digest)) return result;
  Progress inner;  // the outer question counts views, not bytes
  return compute(*recipe, pool, stop, inner);
}

}  // namespace bentlight::query
