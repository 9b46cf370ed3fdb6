#include <cctype>
#include <charconv>

#include <fmt/format.h>
#include <nlohmann/json.hpp>

#include "base/digest.h"
#include "base/text.h"
#include "http/service.h"
#include "query/encode/encoding.h"

namespace bentlight::http {

namespace {

using query::Parameter;
using query::ParameterKind;
using query::RawParameters;

Parameter format_parameter() {
  return {.name = "format",
          .kind = ParameterKind::choice,
          .summary = "Encoding of the reply, instead of the Accept header field.",
          .choices = {"json", "csv", "npy", "hdf5"},
          .example = "json"};
}

Parameter array_parameter() {
  return {.name = "array",
          .kind = ParameterKind::text,
          .summary = "For npy and csv: which array of the result.",
          .pattern = "[a-z_0-9]{1,64}"};
}

/// Takes `name` out of the parameters; those of the reply's form are no part of the question.
std::optional<std::string> taken(RawParameters& parameters, std::string_view name) {
  const auto found = parameters.find(name);
  if (found == parameters.end()) return std::nullopt;
  std::string text = std::move(found->second);
  parameters.erase(found);
  return text;
}

/// The encoding asked for by format=, or the best of the Accept header field (RFC 9110, 12.5.1).
Expected<query::Encoding> encoding_of(const std::optional<std::string>& format, std::string_view accept) {
  if (format) return query::parse_encoding(*format);
  return query::negotiated_encoding(accept);
}

/// How long the caller will wait for long work: Prefer: wait=N (RFC 7240, 4.3), at most a minute.
std::chrono::milliseconds patience_of(const Request& request) {
  for (const std::string& raw : split(request.header("prefer"), ',')) {
    std::string preference = raw;
    std::erase(preference, ' ');
    if (!preference.starts_with("wait=")) continue;
    const auto seconds = parse_whole_number(std::string_view(preference).substr(5));
    if (seconds && *seconds > 0) return std::chrono::seconds(std::min<long long>(*seconds, 60));
  }
  return std::chrono::milliseconds(0);
}

nlohmann::ordered_json job_json(const query::JobStatus& status) {
  const std::string url = "/v1/jobs/" + status.id;
  nlohmann::ordered_json json = {{"job", status.id},
                                 {"analysis", status.analysis},
                                 {"subject", status.subject},
                                 {"state", std::string(query::name(status.state))},
                                 {"progress", status.fraction()},
                                 {"done", status.done},
                                 {"total", status.total},
                                 {"seconds_running", status.seconds_running},
                                 {"seconds_left", nullptr},
                                 {"url", url},
                                 {"events", url + "/events"}};
  if (status.seconds_left) json["seconds_left"] = *status.seconds_left;
  if (status.state == query::JobState::done) json["result"] = "/v1/results/" + status.id;
  if (status.error) {
    json["problem"] = nlohmann::ordered_json::parse(*problem_reply(*status.error, status.id).body);
  }
  return json;
}

Reply job_reply(const query::Job& job) {
  Reply reply = json_reply(job_json(job.status()).dump());
  reply.status = 202;
  reply.headers = {{"Location", "/v1/jobs/" + job.id()}, {"Retry-After", "1"}};
  return reply;
}

/// A result in the encoding asked for; the job instead when it takes longer than the caller waits.
Expected<Reply> result_reply(const ServiceParts& parts, const query::Recipe& recipe, query::Encoding encoding,
                             const std::string& array, const Request& request, bool is_permalink) {
  const std::string suffix = std::string(query::name(encoding)) + (array.empty() ? "" : "-" + array);
  Reply reply{.etag = recipe.digest + "-" + suffix, .is_immutable = is_permalink};
  reply.headers.emplace_back("Link", fmt::format("</v1/results/{}>; rel=\"bookmark\"", recipe.digest));
  // The digest decides the bytes, so a client that has them needs no computation.
  if (const auto held = request.header("if-none-match"); held.find("\"" + reply.etag + "\"") != held.npos) return reply;

  auto encoded = parts.cache.encoded(recipe.digest, encoding, array);
  if (!encoded) {
    const auto answer = parts.engine.answer(recipe, patience_of(request));
    if (!answer) return failure(answer);
    if (!answer->result) return job_reply(*answer->job);
    auto fresh = query::encode(*answer->result, encoding, {.array = array});
    if (!fresh) return failure(fresh);
    encoded = std::make_shared<const query::Encoded>(std::move(*fresh));
    parts.cache.keep_encoded(recipe.digest, encoding, array, encoded);
  }
  reply.content_type = encoded->content_type;
  reply.body = encoded->bytes;
  if (encoding != query::Encoding::json) {
    reply.headers.emplace_back(
        "Content-Disposition",
        fmt::format("attachment; filename=\"{}_{}_{}{}.{}\"", recipe.subject, recipe.analysis->name,
                    recipe.digest.substr(0, 8), array.empty() ? "" : "_" + array, encoded->file_suffix));
  }
  return reply;
}

/// Sorts out a question's parameters and answers it; `understand` makes the recipe of what is left of them.
template <class Understand>
Expected<Reply> answered(const ServiceParts& parts, const Request& request, bool is_permalink, Understand understand) {
  RawParameters parameters = request.parameters;
  const auto encoding = encoding_of(taken(parameters, "format"), request.header("accept"));
  if (!encoding) return failure(encoding);
  const std::string array = taken(parameters, "array").value_or("");
  const Expected<query::Recipe> recipe = understand(parameters);
  if (!recipe) return failure(recipe);
  return result_reply(parts, *recipe, *encoding, array, request, is_permalink);
}

Expected<Reply> list_reply(const Expected<query::Listing>& listing, const Request& request) {
  if (!listing) return failure(listing);
  nlohmann::ordered_json json = listing->json;
  Reply reply;
  reply.etag = listing->etag;
  if (json.contains("items")) {
    json["next"] = nullptr;
    if (!listing->next_offset.empty()) {
      std::string next = request.path + "?";
      for (const auto& [name, text] : request.parameters) {
        if (name != "offset") next += fmt::format("{}={}&", name, text);
      }
      next += "offset=" + listing->next_offset;
      json["next"] = next;
      reply.headers.emplace_back("Link", fmt::format("<{}>; rel=\"next\"", next));
    }
  }
  reply.body = std::make_shared<const std::string>(
      json.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace));
  return reply;
}

/// Server-sent events of one job: a progress event whenever something changes, and one that says how it ended.
Expected<Reply> job_events(const ServiceParts& parts, const std::string& id) {
  const auto job = parts.jobs.find(id);
  if (!job) return failure(job);
  Reply reply{.content_type = "text/event-stream"};
  reply.headers.emplace_back("Cache-Control", "no-store");
  reply.headers.emplace_back("X-Accel-Buffering", "no");  // a proxy must not hold events back
  struct Seen {
    std::uint64_t revision = ~std::uint64_t{0};
    std::uint64_t done = ~std::uint64_t{0};
  };
  reply.stream = [job = *job, seen = std::make_shared<Seen>()](std::string& piece) {
    const auto status = job->wait_for_news(seen->revision, std::chrono::milliseconds(250));
    if (status.revision == seen->revision && status.done == seen->done) {
      piece = ": still here\n\n";  // keeps proxies from closing, and finds out whether anybody listens
      return true;
    }
    seen->revision = status.revision;
    seen->done = status.done;
    const std::string_view event = status.is_over() ? query::name(status.state) : "progress";
    piece = fmt::format("event: {}\ndata: {}\n\n", event, job_json(status).dump());
    return !status.is_over();
  };
  return reply;
}

Expected<Reply> no_parameters(const Request& request, const std::function<Expected<Reply>()>& reply) {
  if (const auto checked = query::canonical_parameters({}, request.parameters); !checked) return failure(checked);
  return reply();
}

std::vector<Parameter> joined(std::vector<Parameter> first, const std::vector<Parameter>& second) {
  first.insert(first.end(), second.begin(), second.end());
  return first;
}

std::vector<DescribedReply> result_replies() {
  return {{.status = 200,
           .summary = "The result.",
           .schema = "Result",
           .media_types = {"application/json", "text/csv", "application/x-npy", "application/x-hdf5"}},
          {.status = 202, .summary = "Work goes on; the job says how far it is.", .schema = "Job"}};
}

void add_list_routes(std::vector<Route>& routes, const ServiceParts& parts) {
  const auto list = [&](std::string path, std::string name, std::string summary, std::string schema,
                        std::vector<Parameter> filters, auto listing) {
    routes.push_back({.path = std::move(path),
                      .name = std::move(name),
                      .summary = std::move(summary),
                      .parameters = std::move(filters),
                      .replies = {{.summary = "One page of the list.", .schema = std::move(schema)}},
                      .handler = [parts, listing](const Request& request) {
                        return list_reply((parts.lists.*listing)(request.parameters), request);
                      }});
  };
  list("/v1/campaigns", "listCampaigns", "Campaigns of the archive.", "CampaignList", query::paging(),
       &query::Lists::campaigns);
  list("/v1/runs", "listRuns", "Runs, each one flow condition.", "RunList",
       joined(query::run_filters(), query::paging()), &query::Lists::runs);
  list("/v1/views", "listViews", "Views: one run seen at one viewing angle.", "ViewList",
       joined(query::view_filters(), query::paging()), &query::Lists::views);
  list("/v1/index/refusals", "listRefusals", "Files that could not be indexed, and why.", "RefusalList",
       query::paging(), &query::Lists::refusals);
}

void add_item_routes(std::vector<Route>& routes, const ServiceParts& parts) {
  const auto item = [&](std::string path, std::string name, std::string summary, std::string schema, auto listing) {
    routes.push_back({.path = std::move(path),
                      .name = std::move(name),
                      .summary = std::move(summary),
                      .replies = {{.summary = "The item.", .schema = std::move(schema)}},
                      .handler = [parts, listing](const Request& request) {
                        return no_parameters(request, [&] {
                          return list_reply((parts.lists.*listing)(request.arguments.at(0)), request);
                        });
                      }});
  };
  item("/v1/runs/{run}", "getRun", "One run.", "Run", &query::Lists::run);
  item("/v1/views/{view}", "getView", "One view: conditions, geometry, checks, and which analyses are cheap.", "View",
       &query::Lists::view);
}

void add_result_routes(std::vector<Route>& routes, const ServiceParts& parts) {
  for (const query::Analysis& analysis : parts.engine.catalogue().all()) {
    const bool of_run = analysis.subject == query::SubjectKind::run;
    auto parameters = joined(query::preparation_parameters(), analysis.parameters);
    parameters.push_back(format_parameter());
    parameters.push_back(array_parameter());
    routes.push_back({.path = fmt::format("/v1/{}/{}", of_run ? "runs/{run}" : "views/{view}", analysis.name),
                      .name = analysis.name,
                      .summary = analysis.summary,
                      .parameters = std::move(parameters),
                      .replies = result_replies(),
                      .handler = [parts, of_run, name = analysis.name](const Request& request) {
                        return answered(parts, request, false, [&](const RawParameters& given) {
                          const std::string& subject = request.arguments.at(0);
                          return of_run ? parts.engine.run_recipe(subject, name, given)
                                        : parts.engine.view_recipe(subject, name, given);
                        });
                      }});
  }
  routes.push_back({.path = "/v1/results/{digest}",
                    .name = "getResult",
                    .summary = "Permalink: the same bytes as long as the inputs exist.",
                    .parameters = {format_parameter(), array_parameter()},
                    .replies = result_replies(),
                    .handler = [parts](const Request& request) {
                      return answered(parts, request, true, [&](const RawParameters& given) -> Expected<query::Recipe> {
                        if (const auto checked = query::canonical_parameters({}, given); !checked) return failure(checked);
                        return parts.engine.recipe_of(request.arguments.at(0));
                      });
                    }});
  // Last, so that an analysis that does not exist is told apart from an address that does not.
  for (const bool of_run : {false, true}) {
    routes.push_back({.path = of_run ? "/v1/runs/{run}/{analysis}" : "/v1/views/{view}/{analysis}",
                      .handler = [parts, of_run](const Request& request) -> Expected<Reply> {
                        return failure(parts.engine.catalogue().find(
                            request.arguments.at(1), of_run ? query::SubjectKind::run : query::SubjectKind::view));
                      }});
  }
}

void add_job_routes(std::vector<Route>& routes, const ServiceParts& parts) {
  routes.push_back({.path = "/v1/jobs/{job}",
                    .name = "getJob",
                    .summary = "State and progress of long work.",
                    .replies = {{.summary = "The job.", .schema = "Job"}},
                    .handler = [parts](const Request& request) {
                      return no_parameters(request, [&]() -> Expected<Reply> {
                        const auto job = parts.jobs.find(request.arguments.at(0));
                        if (!job) return failure(job);
                        return json_reply(job_json((*job)->status()).dump());
                      });
                    }});
  routes.push_back({.method = "DELETE",
                    .path = "/v1/jobs/{job}",
                    .name = "cancelJob",
                    .summary = "Cancels long work for everybody who waits for it.",
                    .replies = {{.status = 202, .summary = "The job as it stands; it ends between two blocks.", .schema = "Job"}},
                    .handler = [parts](const Request& request) {
                      return no_parameters(request, [&]() -> Expected<Reply> {
                        const auto job = parts.jobs.find(request.arguments.at(0));
                        if (!job) return failure(job);
                        (*job)->cancel();
                        return job_reply(**job);
                      });
                    }});
  routes.push_back({.path = "/v1/jobs/{job}/events",
                    .name = "followJob",
                    .summary = "Progress as server-sent events: progress, then one of done, failed, cancelled.",
                    .replies = {{.summary = "A stream of events.", .media_types = {"text/event-stream"}}},
                    .handler = [parts](const Request& request) {
                      return no_parameters(request, [&] { return job_events(parts, request.arguments.at(0)); });
                    }});
}

Expected<Reply> index_reply(const ServiceParts& parts) {
  const auto counts = parts.lists.counts();
  if (!counts) return failure(counts);
  const auto progress = parts.indexer.progress();
  nlohmann::ordered_json json = {{"state", progress.is_running ? "indexing" : "idle"},
                                 {"campaigns", counts->campaigns},
                                 {"runs", counts->runs},
                                 {"views", counts->views},
                                 {"missing", counts->missing},
                                 {"refusals", counts->refusals},
                                 {"frames", counts->frames},
                                 {"bytes", counts->bytes},
                                 {"revision", counts->revision}};
  json["progress"] = {{"files_done", progress.files_done},
                      {"files_total", progress.files_total},
                      {"bytes_done", progress.bytes_done},
                      {"bytes_total", progress.bytes_total},
                      {"bytes_per_second", progress.bytes_per_second},
                      {"current", progress.current}};
  if (progress.error) json["problem"] = nlohmann::ordered_json::parse(*problem_reply(*progress.error, "indexing").body);
  return json_reply(json.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace));
}

void add_service_routes(std::vector<Route>& routes, const ServiceParts& parts) {
  routes.push_back({.path = "/v1/index",
                    .name = "getIndex",
                    .summary = "What is indexed, and how far indexing is.",
                    .replies = {{.summary = "Counts and progress.", .schema = "IndexState"}},
                    .handler = [parts](const Request& request) {
                      return no_parameters(request, [&] { return index_reply(parts); });
                    }});
  routes.push_back({.path = "/health/live",
                    .name = "isAlive",
                    .summary = "Answers as long as the process serves.",
                    .replies = {{.summary = "Alive.", .schema = "Health"}},
                    .handler = [](const Request&) -> Expected<Reply> { return json_reply(R"({"status":"alive"})"); }});
  routes.push_back({.path = "/health/ready",
                    .name = "isReady",
                    .summary = "Answers when questions can be answered: the index can be read.",
                    .replies = {{.summary = "Ready.", .schema = "Health"}},
                    .handler = [parts](const Request&) -> Expected<Reply> {
                      if (const auto counts = parts.lists.counts(); !counts) return failure(counts);
                      return json_reply(R"({"status":"ready"})");
                    }});
}

}  // namespace

std::vector<Route> service_routes(ServiceParts parts, Handler metrics) {
  std::vector<Route> routes;
  add_list_routes(routes, parts);
  add_item_routes(routes, parts);
  add_result_routes(routes, parts);
  add_job_routes(routes, parts);
  add_service_routes(routes, parts);
  routes.push_back({.path = "/metrics",
                    .name = "getMetrics",
                    .summary = "Counters for a dashboard, in the OpenMetrics text format.",
                    .replies = {{.summary = "The counters.", .media_types = {"application/openmetrics-text"}}},
                    .handler = std::move(metrics)});
  routes.push_back({.path = "/openapi.json",
                    .name = "getDescription",
                    .summary = "This description.",
                    .replies = {{.summary = "OpenAPI 3.1."}}});
  const auto described = std::make_shared<const std::string>(openapi_description(routes, parts.engine.catalogue()));
  routes.back().handler = [described](const Request&) -> Expected<Reply> {
    return Reply{.body = described, .etag = sha256_hex(*described).substr(0, 32)};
  };
  return routes;
}

}  // namespace bentlight::http
