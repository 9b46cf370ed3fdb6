#include <algorithm>
#include <cmath>
#include <limits>
#include <memory>

#include <fmt/format.h>

#include "base/limits.h"
#include "query/analyses/analyses.h"

namespace bentlight::query {

namespace {

using Analyses = std::shared_ptr<const std::vector<Analysis>>;

/// Which value of which analysis a question maps.
struct MappedValue {
  const Analysis* analysis;
  std::string value;
};

/// "statistics.opd_rms_mean", or a bare value of statistics.
Expected<MappedValue> mapped_value(const Analyses& analyses, const std::string& quantity) {
  const auto dot = quantity.find('.');
  const std::string wanted = dot == std::string::npos ? "statistics" : quantity.substr(0, dot);
  const std::string value = dot == std::string::npos ? quantity : quantity.substr(dot + 1);
  std::vector<std::string> accepted;
  for (const Analysis& analysis : *analyses) {
    for (const DeclaredValue& declared : analysis.values) {
      if (analysis.name == wanted && declared.name == value) return MappedValue{&analysis, value};
      accepted.push_back(analysis.name + "." + declared.name);
    }
  }
  return failure(ErrorCode::bad_parameter, fmt::format("quantity={} is no value of an analysis", quantity), "quantity",
                 accepted);
}

std::string quantity_of(const RawParameters& given) {
  const auto found = given.find("quantity");
  return found == given.end() ? "opd_rms_mean" : found->second;
}

/// The parameters of the inner question: everything but `quantity`. Maps are not wanted, and without them more
/// preparations are answered from summaries.
RawParameters inner_parameters(const Recipe& recipe, const Analysis& inner) {
  RawParameters parameters = recipe.parameters;
  parameters.erase("quantity");
  const auto maps = std::ranges::find(inner.parameters, "maps", &Parameter::name);
  if (maps != inner.parameters.end()) parameters["maps"] = "no";
  return parameters;
}

struct Cell {
  double value = std::numeric_limits<double>::quiet_NaN();
  double low = value, high = value;
  Unit unit;
  std::optional<Error> error;
};

Cell cell_of(const Expected<std::shared_ptr<const Result>>& answer, const std::string& name) {
  Cell cell;
  if (!answer) {
    cell.error = answer.error();
    return cell;
  }
  if (const Value* value = (*answer)->value(name)) {
    cell.value = value->value;
    cell.low = value->low.value_or(cell.low);
    cell.high = value->high.value_or(cell.high);
    cell.unit = value->unit;
  }
  return cell;
}

Result mapped(const Recipe& recipe, const std::vector<Cell>& cells) {
  Result result;
  const double none = std::numeric_limits<double>::quiet_NaN();
  std::vector<double> azimuth, elevation, value, low, high, number;
  nlohmann::ordered_json views = nlohmann::ordered_json::array();
  Unit unit{"1"};
  for (std::size_t i = 0; i < cells.size(); ++i) {
    const auto& record = recipe.run_views[i];
    azimuth.push_back(record.azimuth_deg.value_or(none));
    elevation.push_back(record.elevation_deg.value_or(none));
    value.push_back(cells[i].value);
    low.push_back(cells[i].low);
    high.push_back(cells[i].high);
    number.push_back(static_cast<double>(i));
    views.push_back(record.id);
    if (!cells[i].unit.name.empty()) unit = {cells[i].unit.name};  // the inner answer has its unit of display already
    if (cells[i].error) {
      result.warnings.push_back({std::string(name(cells[i].error->code)), record.id + ": " + cells[i].error->text});
    }
  }
  const std::vector<std::size_t> shape = {cells.size()};
  result.arrays.push_back({"view", shape, {"1"}, {"view"}, std::move(number)});
  result.arrays.push_back({"azimuth", shape, {"deg"}, {"view"}, std::move(azimuth)});
  result.arrays.push_back({"elevation", shape, {"deg"}, {"view"}, std::move(elevation)});
  result.arrays.push_back({"value", shape, unit, {"view"}, std::move(value)});
  result.arrays.push_back({"low", shape, unit, {"view"}, std::move(low)});
  result.arrays.push_back({"high", shape, unit, {"view"}, std::move(high)});
  result.provenance["views"] = std::move(views);
  return result;
}

Expected<Result> compute(const Analyses& analyses, const Recipe& recipe, Work& work) {
  const auto wanted = mapped_value(analyses, recipe.text("quantity"));
  if (!wanted) return failure(wanted);
  const RawParameters parameters = inner_parameters(recipe, *wanted->analysis);
  std::vector<Cell> cells(recipe.run_views.size());
  work.progress.total = cells.size();
  const auto asked = work.pool.for_each(cells.size(), work.stop, [&](std::size_t i, std::size_t) -> Expected<void> {
    const auto answer =
        work.ask(recipe.run_views[i].id, wanted->analysis->name, parameters, work.pool, work.stop);
    // A view that cannot answer leaves its place empty and says why; a bad question fails for all alike.
    if (!answer && (answer.error().code == ErrorCode::cancelled || answer.error().code == ErrorCode::bad_parameter ||
                    answer.error().code == ErrorCode::unsupported_preparation)) {
      return failure(answer);
    }
    cells[i] = cell_of(answer, wanted->value);
    ++work.progress.done;
    return {};
  });
  if (!asked) return failure(asked);
  return mapped(recipe, cells);
}

/// Whether each view will have to read its frames. The views are not opened for a plan: what the summary cannot know of
/// any view is told from the parameters alone.
bool needs_frames(const Recipe& recipe) {
  return recipe.text_if_given("aperture") || recipe.number("obscuration") > 0.0 || recipe.text("center") != "0,0" ||
         recipe.text("mean_over") == "window";
}

Expected<Plan> plan(const Recipe& recipe) {
  Plan plan{.source = Source::summary, .memory_bytes = 64 * limits::mebi + recipe.run_views.size() * 4096};
  if (!needs_frames(recipe)) return plan;
  plan.source = Source::frames;
  for (const auto& record : recipe.run_views) {
    plan.decoded_bytes += record.frames * record.rows * record.columns * sizeof(float);
  }
  plan.memory_bytes = limits::question_memory_bytes;
  return plan;
}

}  // namespace

Analysis field_of_regard(std::vector<Analysis> analyses_of_views) {
  const auto analyses = std::make_shared<const std::vector<Analysis>>(std::move(analyses_of_views));
  return {
      .name = "field-of-regard",
      .summary = "Any value of an analysis over all viewing angles of a run.",
      .method = "Each view is asked the same question; see the method of the analysis that gives the value.",
      .subject = SubjectKind::run,
      .parameters = {{.name = "quantity",
                      .kind = ParameterKind::text,
                      .summary = "ANALYSIS.VALUE, or a bare value of statistics.",
                      .standard = "opd_rms_mean",
                      .pattern = R"([a-z0-9_.-]{1,128})",
                      .example = "statistics.opd_rms_mean"}},
      .arrays = {{"azimuth", "deg", {"view"}, "Azimuth of each view."},
                 {"elevation", "deg", {"view"}, "Elevation of each view."},
                 {"value", "", {"view"}, "The value, in its own unit."},
                 {"low", "", {"view"}, "Lower end of its interval, where it has one."},
                 {"high", "", {"view"}, "Upper end of its interval."}},
      .plan = plan,
      .compute = [analyses](const Recipe& recipe, Work& work) { return compute(analyses, recipe, work); },
      .more_parameters = [analyses](const RawParameters& given) -> Expected<std::vector<Parameter>> {
        const auto wanted = mapped_value(analyses, quantity_of(given));
        if (!wanted) return failure(wanted);
        std::vector<Parameter> more = wanted->analysis->parameters;
        std::erase_if(more, [](const Parameter& parameter) { return parameter.name == "quantity"; });
        return more;
      },
  };
}

}  // namespace bentlight::query
