// The OpenAPI 3.1 description, printed from the route table and the analyses' declarations.
#include <regex>

#include <fmt/format.h>
#include <nlohmann/json.hpp>

#include "http/service.h"

namespace bentlight::http {

namespace {

using nlohmann::ordered_json;
using query::Parameter;
using query::ParameterKind;

ordered_json typed(std::string_view type, std::string_view description = {}) {
  ordered_json schema = {{"type", type}};
  if (!description.empty()) schema["description"] = description;
  return schema;
}

ordered_json nullable(std::string_view type) { return {{"type", {type, "null"}}}; }

ordered_json reference(const std::string& schema) { return {{"$ref", "#/components/schemas/" + schema}}; }

ordered_json list_of(const std::string& item) {
  return {{"type", "object"},
          {"required", {"items", "next"}},
          {"properties",
           {{"items", {{"type", "array"}, {"items", reference(item)}}},
            {"next", {{"type", {"string", "null"}}, {"description", "Address of the next page."}}}}}};
}

ordered_json object_of(std::initializer_list<std::pair<std::string, ordered_json>> properties,
                       std::vector<std::string> optional = {}) {
  ordered_json schema = {{"type", "object"}, {"required", ordered_json::array()}, {"properties", ordered_json::object()}};
  for (const auto& [name, property] : properties) {
    schema["properties"][name] = property;
    if (std::ranges::find(optional, name) == optional.end()) schema["required"].push_back(name);
  }
  return schema;
}

ordered_json range_schema() {
  ordered_json range = object_of({{"low", typed("number")}, {"high", typed("number")}});
  range["type"] = {"object", "null"};
  return range;
}

ordered_json view_schema() {
  return object_of({{"id", typed("string")},
                    {"campaign", typed("string", "Id of the campaign.")},
                    {"run", typed("string", "Id of the run.")},
                    {"run_name", typed("string", "The run as the file names it.")},
                    {"source", typed("string")},
                    {"azimuth_deg", nullable("number")},
                    {"elevation_deg", nullable("number")},
                    {"frames", typed("integer")},
                    {"rows", typed("integer")},
                    {"columns", typed("integer")},
                    {"frame_rate_hz", typed("number")},
                    {"duration_s", typed("number")},
                    {"aperture_diameter_m", nullable("number")},
                    {"mach", nullable("number")},
                    {"velocity_m_s", nullable("number")},
                    {"opd_rms_mean_m", nullable("number")},
                    {"state", {{"enum", {"ready", "missing"}}}},
                    {"checks", {{"type", "array"}, {"items", reference("Check")}}}});
}

ordered_json result_schema() {
  ordered_json value = object_of({{"value", nullable("number")},
                                  {"unit", typed("string")},
                                  {"low", nullable("number")},
                                  {"high", nullable("number")},
                                  {"level", typed("number", "Confidence of the interval from low to high.")}},
                                 {"low", "high", "level"});
  ordered_json array = object_of(
      {{"shape", {{"type", "array"}, {"items", typed("integer")}}},
       {"unit", typed("string")},
       {"axes",
        {{"type", "array"},
         {"items", typed("string")},
         {"description", "Names of arrays of the same result, one per dimension."}}},
       {"data",
        {{"type", "array"},
         {"items", nullable("number")},
         {"description", "Row-major, flat; null for what is not a number."}}}});
  return object_of({{"analysis", typed("string")},
                    {"subject", typed("string")},
                    {"values", {{"type", "object"}, {"additionalProperties", value}}},
                    {"arrays", {{"type", "object"}, {"additionalProperties", array}}},
                    {"warnings", {{"type", "array"}, {"items", reference("Warning")}}},
                    {"provenance", {{"type", "object"}, {"required", {"digest", "software"}}}}});
}

ordered_json schemas() {
  ordered_json view = view_schema();
  return {{"Campaign", object_of({{"id", typed("string")},
                                  {"name", typed("string")},
                                  {"runs", typed("integer")},
                                  {"views", typed("integer")}})},
          {"CampaignList", list_of("Campaign")},
          {"Run", object_of({{"id", typed("string")},
                             {"name", typed("string")},
                             {"campaign", typed("string")},
                             {"source", typed("string")},
                             {"views", typed("integer")},
                             {"azimuth_deg", range_schema()},
                             {"elevation_deg", range_schema()},
                             {"mach", nullable("number")},
                             {"velocity_m_s", nullable("number")},
                             {"density_kg_m3", nullable("number")},
                             {"temperature_k", nullable("number")},
                             {"reference_length_m", nullable("number")}})},
          {"RunList", list_of("Run")},
          {"View", std::move(view)},
          {"ViewList", list_of("View")},
          {"Check", object_of({{"code", typed("string")},
                               {"severity", typed("string")},
                               {"figure", typed("number")},
                               {"text", typed("string")}})},
          {"Refusal", object_of({{"path", typed("string")},
                                 {"code", typed("string")},
                                 {"text", typed("string")},
                                 {"refused_at_ms", typed("integer")}})},
          {"RefusalList", list_of("Refusal")},
          {"Warning", object_of({{"code", typed("string")}, {"text", typed("string")}})},
          {"Result", result_schema()},
          {"Job", object_of({{"job", typed("string")},
                             {"state", {{"enum", {"queued", "running", "done", "failed", "cancelled"}}}},
                             {"progress", typed("number", "From 0 to 1.")},
                             {"done", typed("integer")},
                             {"total", typed("integer")},
                             {"seconds_running", typed("number")},
                             {"seconds_left", nullable("number")},
                             {"url", typed("string")},
                             {"events", typed("string")},
                             {"result", typed("string")},
                             {"problem", reference("Problem")}},
                            {"result", "problem"})},
          {"IndexState", object_of({{"state", {{"enum", {"idle", "indexing"}}}},
                                    {"campaigns", typed("integer")},
                                    {"runs", typed("integer")},
                                    {"views", typed("integer")},
                                    {"missing", typed("integer")},
                                    {"refusals", typed("integer")},
                                    {"frames", typed("integer")},
                                    {"bytes", typed("integer")},
                                    {"revision", typed("integer")},
                                    {"progress", typed("object")}})},
          {"Health", object_of({{"status", typed("string")}})},
          {"Problem", object_of({{"type", typed("string")},
                                 {"title", typed("string")},
                                 {"status", typed("integer")},
                                 {"detail", typed("string")},
                                 {"instance", typed("string")},
                                 {"code", typed("string", "Stable; listed in schema/errors.json.")},
                                 {"parameter", typed("string")},
                                 {"accepted", {{"type", "array"}, {"items", typed("string")}}}},
                                {"parameter", "accepted"})}};
}

ordered_json parameter_schema(const Parameter& parameter) {
  ordered_json schema;
  const bool is_number = parameter.kind == ParameterKind::number || parameter.kind == ParameterKind::whole_number;
  switch (parameter.kind) {
    case ParameterKind::number:
      schema = {{"type", "number"}};
      break;
    case ParameterKind::whole_number:
      schema = {{"type", "integer"}};
      break;
    case ParameterKind::choice:
      schema = {{"type", "string"}, {"enum", parameter.choices}};
      break;
    case ParameterKind::text:
      schema = {{"type", "string"}};
      if (!parameter.pattern.empty()) schema["pattern"] = "^(?:" + parameter.pattern + ")$";
      break;
  }
  if (is_number && parameter.low > -1e300) schema["minimum"] = parameter.low;
  if (is_number && parameter.high < 1e300) schema["maximum"] = parameter.high;
  if (!parameter.standard.empty()) {
    schema["default"] = is_number ? ordered_json::parse(parameter.standard) : ordered_json(parameter.standard);
  }
  return schema;
}

ordered_json parameter_json(const Parameter& parameter) {
  std::string description = parameter.summary;
  if (!parameter.unit.empty()) description += fmt::format(" Unit: {}.", parameter.unit);
  ordered_json json = {{"name", parameter.name},
                       {"in", "query"},
                       {"required", false},
                       {"description", description},
                       {"schema", parameter_schema(parameter)}};
  if (!parameter.example.empty()) {
    const bool is_text = parameter.kind == ParameterKind::text || parameter.kind == ParameterKind::choice;
    json["example"] = is_text ? ordered_json(parameter.example) : ordered_json::parse(parameter.example);
  }
  return json;
}

ordered_json response_json(const DescribedReply& reply) {
  ordered_json content = ordered_json::object();
  for (const std::string& type : reply.media_types) {
    const bool is_json = type == "application/json" && !reply.schema.empty();
    content[type] = is_json ? ordered_json{{"schema", reference(reply.schema)}} : ordered_json::object();
  }
  return {{"description", reply.summary}, {"content", std::move(content)}};
}

ordered_json operation_json(const Route& route) {
  ordered_json operation = {{"operationId", route.name}, {"summary", route.summary}};
  ordered_json parameters = ordered_json::array();
  static const std::regex in_path(R"(\{([a-z_]+)\})");
  for (std::sregex_iterator found(route.path.begin(), route.path.end(), in_path), end; found != end; ++found) {
    parameters.push_back({{"name", (*found)[1].str()},
                          {"in", "path"},
                          {"required", true},
                          {"description", fmt::format("Id of the {}.", (*found)[1].str())},
                          {"schema", {{"type", "string"}, {"pattern", R"(^[\w.:-]+$)"}}}});
  }
  for (const Parameter& parameter : route.parameters) parameters.push_back(parameter_json(parameter));
  if (!parameters.empty()) operation["parameters"] = std::move(parameters);
  operation["responses"] = ordered_json::object();
  for (const DescribedReply& reply : route.replies) {
    operation["responses"][fmt::format("{}", reply.status)] = response_json(reply);
  }
  operation["responses"]["default"] = {
      {"description", "What went wrong, as problem details (RFC 9457)."},
      {"content", {{"application/problem+json", {{"schema", reference("Problem")}}}}}};
  return operation;
}

std::string lower(std::string text) {
  for (char& c : text) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
  return text;
}

}  // namespace

std::string openapi_description(const std::vector<Route>& routes, const query::Catalogue& catalogue) {
  ordered_json paths = ordered_json::object();
  for (const Route& route : routes) {
    if (!route.name.empty()) paths[route.path][lower(route.method)] = operation_json(route);
  }
  ordered_json analyses = ordered_json::array();
  for (const query::Analysis& analysis : catalogue.all()) {
    ordered_json values = ordered_json::array(), arrays = ordered_json::array();
    for (const auto& value : analysis.values) {
      values.push_back({{"name", value.name}, {"unit", value.unit}, {"summary", value.summary}});
    }
    for (const auto& array : analysis.arrays) {
      arrays.push_back({{"name", array.name}, {"unit", array.unit}, {"axes", array.axes}, {"summary", array.summary}});
    }
    analyses.push_back({{"name", analysis.name},
                        {"subject", analysis.subject == query::SubjectKind::view ? "view" : "run"},
                        {"summary", analysis.summary},
                        {"method", analysis.method},
                        {"values", std::move(values)},
                        {"arrays", std::move(arrays)}});
  }
  const ordered_json description = {
      {"openapi", "3.1.0"},
      {"info",
       {{"title", "Bentlight"},
        {"version", BENTLIGHT_VERSION},
        {"summary", "Statistics of an archive of aero-optical wavefronts, computed where the archive is."},
        {"description",
         "Every question is a GET and may be asked again: its ETag is the digest of the question and its inputs. Units "
         "inside x-analyses are SI; replies use length_unit. An unknown parameter is an error, never ignored."}}},
      {"servers", {{{"url", "/"}}}},
      {"paths", std::move(paths)},
      {"components", {{"schemas", schemas()}}},
      {"x-analyses", std::move(analyses)}};
  return description.dump(2) + "\n";
}

}  // namespace bentlight::http
