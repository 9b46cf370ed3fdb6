#include "query/lists.h"

#include <algorithm>
#include <array>

#include <fmt/format.h>

#include "base/digest.h"
#include "base/limits.h"
#include "base/text.h"

namespace bentlight::query {

namespace {

using nlohmann::ordered_json;

constexpr std::array range_columns = {"azimuth_deg", "elevation_deg",       "mach",          "velocity_m_s",
                                      "frames",      "aperture_diameter_m", "frame_rate_hz", "opd_rms_mean_m"};

const std::vector<std::string> sort_columns = {"id",     "azimuth_deg",   "elevation_deg", "mach",
                                               "frames", "frame_rate_hz", "opd_rms_mean_m"};

Parameter text_filter(std::string name, std::string summary) {
  return {.name = std::move(name), .kind = ParameterKind::text, .summary = std::move(summary), .pattern = ".{1,200}"};
}

ordered_json number_or_null(const std::optional<double>& value) { return value ? ordered_json(*value) : nullptr; }

std::optional<std::string> text_of(const RawParameters& parameters, std::string_view name) {
  const auto found = parameters.find(name);
  return found == parameters.end() ? std::nullopt : std::optional(found->second);
}

struct Paging {
  std::size_t limit, offset;
};

Paging paging_of(const RawParameters& parameters) {
  return {static_cast<std::size_t>(*parse_whole_number(parameters.at("limit"))),
          static_cast<std::size_t>(*parse_whole_number(parameters.at("offset")))};
}

/// low..high, either end may be missing, or one number.
Expected<index::ColumnRange> parse_range(const std::string& name, const std::string& text) {
  const auto refused = failure(ErrorCode::bad_parameter, fmt::format("{}={} is not a range", name, text), name,
                               {"low..high, as 0.4..0.6", "low..", "..high", "one number"});
  const auto dots = text.find("..");
  if (dots == std::string::npos) {
    const auto value = parse_number(text);
    if (!value) return refused;
    return index::ColumnRange{*value, *value};
  }
  index::ColumnRange range;
  const std::string low = text.substr(0, dots), high = text.substr(dots + 2);
  if (!low.empty() && !(range.low = parse_number(low))) return refused;
  if (!high.empty() && !(range.high = parse_number(high))) return refused;
  return range;
}

Expected<index::ViewFilter> view_filter(const RawParameters& parameters) {
  index::ViewFilter filter{.campaign = text_of(parameters, "campaign"),
                           .run = text_of(parameters, "run"),
                           .source = text_of(parameters, "source"),
                           .state = text_of(parameters, "state")};
  for (const char* column : range_columns) {
    const auto text = text_of(parameters, column);
    if (!text) continue;
    const auto range = parse_range(column, *text);
    if (!range) return failure(range);
    filter.ranges.emplace(column, *range);
  }
  std::string sort = parameters.at("sort");
  filter.descending = sort.starts_with('-');
  if (filter.descending) sort.erase(0, 1);
  if (std::ranges::find(sort_columns, sort) == sort_columns.end()) {
    return failure(ErrorCode::bad_parameter, fmt::format("sort={} is no column to sort by", sort), "sort", sort_columns);
  }
  filter.sort = sort;
  const Paging paging = paging_of(parameters);
  filter.limit = paging.limit;
  filter.offset = paging.offset;
  return filter;
}

ordered_json view_json(const index::ViewRecord& record) {
  return {{"id", record.id},
          {"campaign", record.campaign},
          {"run", record.run},
          {"run_name", record.run_name},
          {"source", record.source},
          {"azimuth_deg", number_or_null(record.azimuth_deg)},
          {"elevation_deg", number_or_null(record.elevation_deg)},
          {"frames", record.frames},
          {"rows", record.rows},
          {"columns", record.columns},
          {"frame_rate_hz", record.frame_rate_hz},
          {"duration_s", record.duration_s},
          {"aperture_diameter_m", number_or_null(record.aperture_diameter_m)},
          {"mach", number_or_null(record.mach)},
          {"velocity_m_s", number_or_null(record.velocity_m_s)},
          {"opd_rms_mean_m", number_or_null(record.opd_rms_mean_m)},
          {"state", record.state},
          {"checks", ordered_json::parse(record.checks, nullptr, false)}};
}

ordered_json conditions_json(const index::ViewRecord& record) {
  return {{"mach", number_or_null(record.mach)},
          {"velocity_m_s", number_or_null(record.velocity_m_s)},
          {"density_kg_m3", number_or_null(record.density_kg_m3)},
          {"temperature_k", number_or_null(record.temperature_k)},
          {"reference_length_m", number_or_null(record.reference_length_m)},
          {"wavelength_m", number_or_null(record.wavelength_m)},
          {"gladstone_dale_m3_kg", number_or_null(record.gladstone_dale_m3_kg)},
          {"note", record.note}};
}

ordered_json run_json(const index::RunRecord& record) {
  const auto span = [](const std::optional<double>& low, const std::optional<double>& high) -> ordered_json {
    if (!low) return nullptr;
    return {{"low", *low}, {"high", *high}};
  };
  return {{"id", record.id},
          {"name", record.name},
          {"campaign", record.campaign},
          {"source", record.source},
          {"views", record.views},
          {"azimuth_deg", span(record.azimuth_low_deg, record.azimuth_high_deg)},
          {"elevation_deg", span(record.elevation_low_deg, record.elevation_high_deg)},
          {"mach", number_or_null(record.mach)},
          {"velocity_m_s", number_or_null(record.velocity_m_s)},
          {"density_kg_m3", number_or_null(record.density_kg_m3)},
          {"temperature_k", number_or_null(record.temperature_k)},
          {"reference_length_m", number_or_null(record.reference_length_m)}};
}

/// One page as a list; `item` gives the JSON of one record.
template <class Record, class Item>
Listing page_listing(const index::Page<Record>& page, const Paging& paging, Item item) {
  Listing listing;
  listing.json["items"] = ordered_json::array();
  for (const Record& record : page.items) listing.json["items"].push_back(item(record));
  if (page.more) listing.next_offset = fmt::format("{}", paging.offset + page.items.size());
  return listing;
}

/// The ETag of a listing is that of its content: it stays when the index changed elsewhere.
Expected<Listing> tagged(Listing listing) {
  listing.etag = sha256_hex(listing.json.dump(-1, ' ', false, ordered_json::error_handler_t::replace) +
                            listing.next_offset)
                     .substr(0, 32);
  return listing;
}

std::vector<Parameter> joined(std::vector<Parameter> first, const std::vector<Parameter>& second) {
  first.insert(first.end(), second.begin(), second.end());
  return first;
}

}  // namespace

std::vector<Parameter> paging() {
  return {{.name = "limit",
           .kind = ParameterKind::whole_number,
           .summary = "Items on a page.",
           .standard = "100",
           .low = 1,
           .high = static_cast<double>(limits::page_items)},
          {.name = "offset",
           .kind = ParameterKind::whole_number,
           .summary = "Items before this page; `next` of a reply has it filled in.",
           .standard = "0",
           .low = 0,
           .high = 1e9}};
}

std::vector<Parameter> run_filters() {
  return {text_filter("campaign", "Id of a campaign."), text_filter("source", "simulation, tunnel, flight.")};
}

std::vector<Parameter> view_filters() {
  std::vector<Parameter> filters = {text_filter("campaign", "Id of a campaign."), text_filter("run", "Id of a run."),
                                    text_filter("source", "simulation, tunnel, flight.")};
  filters.push_back({.name = "state",
                     .kind = ParameterKind::choice,
                     .summary = "Views whose file is there, or gone.",
                     .choices = {"ready", "missing"}});
  for (const char* column : range_columns) {
    filters.push_back({.name = column,
                       .kind = ParameterKind::text,
                       .summary = "Range low..high, either end may stay away.",
                       .pattern = R"([0-9.eE+-]{1,64})",
                       .example = "0.."});
  }
  filters.push_back({.name = "sort",
                     .kind = ParameterKind::text,
                     .summary = "Column to sort by; with a minus sign in front, downwards.",
                     .standard = "id",
                     .pattern = "-?[a-z_0-9]{1,64}",
                     .example = "-opd_rms_mean_m"});
  return filters;
}

Expected<Listing> Lists::campaigns(const RawParameters& given) const {
  const auto parameters = canonical_parameters(paging(), given);
  if (!parameters) return failure(parameters);
  const Paging page = paging_of(*parameters);
  const auto records = index_.campaigns(page.limit, page.offset);
  if (!records) return failure(records);
  return tagged(page_listing(*records, page, [](const index::CampaignRecord& record) -> ordered_json {
    return {{"id", record.id}, {"name", record.name}, {"runs", record.runs}, {"views", record.views}};
  }));
}

Expected<Listing> Lists::runs(const RawParameters& given) const {
  const auto parameters = canonical_parameters(joined(run_filters(), paging()), given);
  if (!parameters) return failure(parameters);
  const Paging page = paging_of(*parameters);
  const auto records = index_.runs({.campaign = text_of(*parameters, "campaign"), .source = text_of(*parameters, "source")},
                                   page.limit, page.offset);
  if (!records) return failure(records);
  return tagged(page_listing(*records, page, run_json));
}

Expected<Listing> Lists::views(const RawParameters& given) const {
  const auto parameters = canonical_parameters(joined(view_filters(), paging()), given);
  if (!parameters) return failure(parameters);
  const auto filter = view_filter(*parameters);
  if (!filter) return failure(filter);
  const auto records = index_.views(*filter);
  if (!records) return failure(records);
  return tagged(page_listing(*records, paging_of(*parameters), view_json));
}

Expected<Listing> Lists::refusals(const RawParameters& given) const {
  const auto parameters = canonical_parameters(paging(), given);
  if (!parameters) return failure(parameters);
  const Paging page = paging_of(*parameters);
  const auto records = index_.refusals(page.limit, page.offset);
  if (!records) return failure(records);
  return tagged(page_listing(*records, page, [](const index::RefusalRecord& record) -> ordered_json {
    return {{"path", record.path}, {"code", record.code}, {"text", record.text}, {"refused_at_ms", record.refused_at_ms}};
  }));
}

Expected<Listing> Lists::run(const std::string& id) const {
  const auto record = index_.run(id);
  if (!record) return failure(record);
  return tagged({.json = run_json(*record)});
}

Expected<Listing> Lists::view(const std::string& id) const {
  const auto open = shelf_.open(id);
  if (!open) return failure(open);
  const OpenView& view = **open;
  Listing listing{.json = view_json(view.record)};
  listing.json["path"] = view.record.path;
  listing.json["dataset"] = view.record.dataset;
  listing.json["points"] = view.native.points();
  listing.json["aperture_measured_m"] = 2 * view.native.radius_m();
  listing.json["start_s"] = view.record.start_s;
  listing.json["indexed_at_ms"] = view.record.indexed_at_ms;
  listing.json["conditions"] = conditions_json(view.record);
  listing.json["signals"] = ordered_json::array();
  for (const auto& signal : view.file.signals) {
    listing.json["signals"].push_back({{"name", signal.name}, {"unit", signal.unit}});
  }
  listing.json["analyses"] = ordered_json::array();
  for (const Analysis& analysis : catalogue_.all()) {
    if (analysis.subject != SubjectKind::view) continue;
    ordered_json entry = {{"name", analysis.name}, {"summary", analysis.summary}};
    if (const auto recipe = recipe_for_view(analysis, *open, {})) {
      const auto plan = analysis.plan(*recipe);
      entry["source"] = plan ? std::string(name(plan->source)) : "frames";
      entry["bytes_to_read"] = plan ? ordered_json(plan->stored_bytes) : nullptr;
    }
    listing.json["analyses"].push_back(std::move(entry));
  }
  return tagged(std::move(listing));
}

}  // namespace bentlight::query
