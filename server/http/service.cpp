#include "http/service.h"

#include <arpa/inet.h>
#include <netinet/in.h>
#include <sys/socket.h>

#include <algorithm>
#include <chrono>
#include <random>
#include <regex>

#include <fmt/format.h>
#include <httplib.h>

#include "base/limits.h"
#include "base/text.h"
#include "http/compression.h"
#include "http/connection_queue.h"
#include "http/metrics.h"
#include "http/static_page.h"

namespace bentlight::http {

namespace {

using namespace std::chrono_literals;

bool is_loopback(const std::string& host) {
  in_addr v4{};
  in6_addr v6{};
  if (host == "localhost") return true;
  if (::inet_pton(AF_INET, host.c_str(), &v4) == 1) return (ntohl(v4.s_addr) >> 24) == 127;
  return ::inet_pton(AF_INET6, host.c_str(), &v6) == 1 && IN6_IS_ADDR_LOOPBACK(&v6);
}

/// "/v1/views/{view}" as a regular expression whose groups are the arguments.
std::string pattern_of(const std::string& path) {
  return std::regex_replace(std::regex_replace(path, std::regex(R"(\.)"), R"(\.)"), std::regex(R"(\{[a-z_]+\})"),
                            R"(([\w.:-]+))");
}

bool matches_etag(std::string_view condition, std::string_view etag) {
  // RFC 9110, 13.1.2: weak comparison; the list may hold *, W/"…" and "…".
  if (condition == "*") return true;
  for (std::string part : split(condition, ',')) {
    std::erase(part, ' ');
    if (part.starts_with("W/")) part.erase(0, 2);
    if (part == fmt::format("\"{}\"", etag)) return true;
  }
  return false;
}

class HttplibService final : public Service {
 public:
  HttplibService(ServiceParts parts, ServiceOptions options)
      : parts_(parts), options_(std::move(options)), page_(parts.files, options_.page, options_.vendor) {}

  Expected<void> bind() {
    if (!is_loopback(options_.host)) {
      return failure(ErrorCode::bad_option,
                     fmt::format("{} is not a loopback address, and nothing is served beyond loopback without "
                                 "authentication; use 127.0.0.1 and a proxy that signs people in",
                                 options_.host),
                     "listen");
    }
    configure();
    add_routes();
    port_ = options_.port == 0 ? server_.bind_to_any_port(options_.host)
                               : (server_.bind_to_port(options_.host, options_.port) ? options_.port : -1);
    if (port_ <= 0) {
      return failure(ErrorCode::bad_option,
                     fmt::format("cannot listen on {}:{}; another program may be there", options_.host, options_.port),
                     "listen");
    }
    return {};
  }

  int port() const override { return port_; }
  void run() override { server_.listen_after_bind(); }
  void stop() override {
    stopping_ = true;
    server_.stop();
  }

 private:
  void configure() {
    server_.new_task_queue = [this] { return new ConnectionQueue(options_.connections, connections_); };
    server_.set_tcp_nodelay(true);  // a reply leaves in two writes; without this the second waits 40 ms
    server_.set_keep_alive_timeout(2);
    server_.set_keep_alive_max_count(1000);
    server_.set_read_timeout(5s);
    server_.set_write_timeout(10s);
    server_.set_payload_max_length(64 * limits::kibi);
    // The library would share the port with a second server (SO_REUSEPORT), and questions would land on either.
    server_.set_socket_options([](socket_t socket) {
      const int yes = 1;
      ::setsockopt(socket, SOL_SOCKET, SO_REUSEADDR, &yes, sizeof yes);
    });
    server_.set_pre_routing_handler([this](const auto& request, auto& response) { return admit(request, response); });
    server_.set_error_handler([this](const auto& request, auto& response) { explain(request, response); });
    server_.set_exception_handler([this](const auto& request, auto& response, std::exception_ptr fault) {
      std::string what = "unknown";
      try {
        std::rethrow_exception(fault);
      } catch (const std::exception& exception) {
        what = exception.what();
      } catch (...) {
        // Nothing more is known than that something was thrown; the log line below says so.
      }
      const std::string id = new_id();
      parts_.log.error("fault", {{"request", id}, {"path", request.path}, {"what", what}});
      send(problem_reply({ErrorCode::internal, "a fault of the program; the log has it under this instance"}, id),
           request, response);
    });
  }

  /// Refuses what no route could answer, before anything looks at it.
  httplib::Server::HandlerResponse admit(const httplib::Request& request, httplib::Response& response) {
    const auto refuse = [&](ErrorCode code, std::string text) {
      send(problem_reply({code, std::move(text)}, new_id()), request, response);
      return httplib::Server::HandlerResponse::Handled;
    };
    if (request.params.size() > limits::parameters) {
      return refuse(ErrorCode::request_too_large, fmt::format("more than {} parameters", limits::parameters));
    }
    if (request.headers.size() > 100) return refuse(ErrorCode::request_too_large, "more than 100 header fields");
    if (request.has_header("Transfer-Encoding")) {
      return refuse(ErrorCode::request_too_large, "request bodies in chunks are not taken");
    }
    if (request.method != "GET" && request.method != "HEAD" && request.method != "DELETE") {
      response.set_header("Allow", "GET, HEAD, DELETE");
      return refuse(ErrorCode::unsupported_method, request.method + " is not used here");
    }
    return httplib::Server::HandlerResponse::Unhandled;
  }

  /// Gives replies that the library made itself the form of all other errors.
  void explain(const httplib::Request& request, httplib::Response& response) {
    if (response.get_header_value("Content-Type") == "application/problem+json") return;
    const int status = response.status;
    Error error{ErrorCode::unknown_route, "nothing is at " + request.path};
    if (status == 413 || status == 414) error = {ErrorCode::request_too_large, "the request is too large"};
    if (status == 400) error = {ErrorCode::bad_parameter, "the request is not well-formed HTTP"};
    Reply reply = problem_reply(error, new_id());
    reply.status = status;
    send(reply, request, response);
  }

  void add_routes() {
    const Handler metrics = [this](const Request&) { return metrics_reply(); };
    for (Route& route : service_routes(parts_, metrics)) add(std::make_shared<const Route>(std::move(route)));
    server_.Get(R"(/(.*))", [this](const httplib::Request& request, httplib::Response& response) {
      const auto start = std::chrono::steady_clock::now();
      const std::string id = new_id();
      const auto reply = page_.find(request.path);
      finish("page", start, reply ? *reply : problem_reply(reply.error(), id), request, response);
    });
  }

  void add(const std::shared_ptr<const Route>& route) {
    const auto serve = [this, route](const httplib::Request& request, httplib::Response& response) {
      const auto start = std::chrono::steady_clock::now();
      Request question = taken_apart(request);
      auto reply = has_repeated_parameter(request)
                       ? failure(ErrorCode::bad_parameter, "a parameter is given twice", *has_repeated_parameter(request))
                       : route->handler(question);
      if (!reply && status_of(reply.error().code) >= 500) {
        parts_.log.warning("refusal", {{"request", question.id},
                                       {"target", question.target},
                                       {"code", std::string(name(reply.error().code))},
                                       {"text", reply.error().text}});
      }
      finish(route->name, start, reply ? *reply : problem_reply(reply.error(), question.id), request, response);
    };
    const std::string pattern = pattern_of(route->path);
    if (route->method == "GET") server_.Get(pattern, serve);
    if (route->method == "DELETE") server_.Delete(pattern, serve);
  }

  static std::optional<std::string> has_repeated_parameter(const httplib::Request& request) {
    const auto repeated =
        std::ranges::adjacent_find(request.params, [](const auto& a, const auto& b) { return a.first == b.first; });
    return repeated == request.params.end() ? std::nullopt : std::optional(repeated->first);
  }

  Request taken_apart(const httplib::Request& request) {
    Request question{.method = request.method, .target = request.target, .path = request.path, .id = new_id()};
    for (std::size_t i = 1; i < request.matches.size(); ++i) question.arguments.push_back(request.matches[i]);
    for (const auto& [name, value] : request.params) question.parameters.emplace(name, value);
    for (const auto& [name, value] : request.headers) {
      std::string lower = name;
      std::ranges::transform(lower, lower.begin(), [](unsigned char c) { return std::tolower(c); });
      question.headers.emplace(std::move(lower), value);
    }
    return question;
  }

  void finish(const std::string& route, std::chrono::steady_clock::time_point start, const Reply& reply,
              const httplib::Request& request, httplib::Response& response) {
    const std::chrono::duration<double> seconds = std::chrono::steady_clock::now() - start;
    response.set_header("Server-Timing", fmt::format("app;dur={:.2f}", 1e3 * seconds.count()));
    send(reply, request, response);
    metrics_.record(route, response.status, seconds, reply.body ? reply.body->size() : 0);
  }

  void send(const Reply& reply, const httplib::Request& request, httplib::Response& response) {
    response.status = reply.status;
    for (const auto& [name, value] : reply.headers) response.set_header(name, value);
    response.set_header("X-Content-Type-Options", "nosniff");
    response.set_header("Vary", "Accept, Accept-Encoding");
    if (!reply.etag.empty()) {
      response.set_header("ETag", fmt::format("\"{}\"", reply.etag));
      response.set_header("Cache-Control", reply.is_immutable ? "private, max-age=31536000, immutable" : "private, no-cache");
      if (reply.status == 200 && matches_etag(request.get_header_value("If-None-Match"), reply.etag)) {
        response.status = 304;
        return;
      }
    } else if (!response.has_header("Cache-Control")) {
      response.set_header("Cache-Control", "no-store");
    }
    if (reply.stream) return send_stream(reply, response);
    if (!reply.body) return;
    send_body(reply, request, response);
  }

  void send_stream(const Reply& reply, httplib::Response& response) {
    response.set_chunked_content_provider(
        reply.content_type, [this, stream = reply.stream](std::size_t, httplib::DataSink& sink) {
          std::string piece;
          const bool goes_on = stream(piece) && !stopping_;
          if (!piece.empty() && !sink.write(piece.data(), piece.size())) return false;
          if (!goes_on) sink.done();
          return true;
        });
  }

  static void send_body(const Reply& reply, const httplib::Request& request, httplib::Response& response) {
    std::shared_ptr<const std::string> body = reply.body;
    if (auto smaller = compressed(*body, reply.content_type, request.get_header_value("Accept-Encoding"))) {
      response.set_header("Content-Encoding", "gzip");
      body = std::move(smaller);
    }
    if (body->empty()) return;
    // Through a provider, so that the body is not copied, and so that the library compresses nothing on its own.
    response.set_content_provider(body->size(), reply.content_type,
                                  [body](std::size_t offset, std::size_t length, httplib::DataSink& sink) {
                                    return sink.write(body->data() + offset, std::min<std::size_t>(length, limits::mebi));
                                  });
  }

  Reply metrics_reply() const {
    std::string text;
    metrics_.write(text);
    write_gauge(text, "bentlight_connections", "Connections being served.", static_cast<double>(connections_.open));
    write_counter(text, "bentlight_connections_taken", "Connections accepted.", static_cast<double>(connections_.taken));
    const auto jobs = parts_.jobs.counts();
    write_gauge(text, "bentlight_jobs_running", "Questions being computed.", static_cast<double>(jobs.running));
    write_gauge(text, "bentlight_jobs_queued", "Questions waiting.", static_cast<double>(jobs.queued));
    write_gauge(text, "bentlight_jobs_memory_bytes", "Memory set aside for running questions.",
                static_cast<double>(jobs.memory_bytes));
    write_counter(text, "bentlight_jobs_finished", "Questions computed.", static_cast<double>(jobs.finished));
    write_counter(text, "bentlight_jobs_failed", "Questions that failed.", static_cast<double>(jobs.failed));
    write_counter(text, "bentlight_jobs_cancelled", "Questions cancelled.", static_cast<double>(jobs.cancelled));
    write_counter(text, "bentlight_jobs_refused", "Questions refused for want of room.", static_cast<double>(jobs.refused));
    write_counter(text, "bentlight_jobs_joined", "Questions that joined an equal one.", static_cast<double>(jobs.joined));
    write_cache_metrics(text, parts_.cache);
    write_index_metrics(text, parts_.lists, parts_.indexer);
    text += "# EOF\n";
    return {.content_type = "application/openmetrics-text; version=1.0.0; charset=utf-8",
            .body = std::make_shared<const std::string>(std::move(text))};
  }

  static void write_cache_metrics(std::string& text, const query::ResultCache& cache) {
    const auto counts = cache.counts();
    write_counter(text, "bentlight_cache_memory_hits", "Results found in memory.", static_cast<double>(counts.memory_hits));
    write_counter(text, "bentlight_cache_disk_hits", "Results found on disk.", static_cast<double>(counts.disk_hits));
    write_counter(text, "bentlight_cache_misses", "Results that had to be computed.", static_cast<double>(counts.misses));
    write_counter(text, "bentlight_cache_reply_hits", "Replies found encoded.", static_cast<double>(counts.encoded_hits));
    write_counter(text, "bentlight_cache_failures", "Results that could not be kept.", static_cast<double>(counts.failures));
    write_gauge(text, "bentlight_cache_memory_bytes", "Memory of the cache.", static_cast<double>(counts.memory_bytes));
    write_gauge(text, "bentlight_cache_disk_bytes", "Disk of the cache.", static_cast<double>(counts.disk_bytes));
  }

  static void write_index_metrics(std::string& text, const query::Lists& lists, const ingest::Indexer& indexer) {
    if (const auto counts = lists.counts()) {
      write_gauge(text, "bentlight_index_views", "Views that are indexed.", static_cast<double>(counts->views));
      write_gauge(text, "bentlight_index_missing", "Views whose file is gone.", static_cast<double>(counts->missing));
      write_gauge(text, "bentlight_index_refusals", "Files that were refused.", static_cast<double>(counts->refusals));
    }
    const auto progress = indexer.progress();
    write_gauge(text, "bentlight_indexing", "1 while the archive is being indexed.", progress.is_running ? 1.0 : 0.0);
    write_gauge(text, "bentlight_indexing_files_done", "Files looked at.", static_cast<double>(progress.files_done));
    write_gauge(text, "bentlight_indexing_files", "Files to look at.", static_cast<double>(progress.files_total));
    write_gauge(text, "bentlight_indexing_bytes_per_second", "Rate of reading.", progress.bytes_per_second);
  }

  std::string new_id() { return fmt::format("r-{:x}-{:x}", start_ns_, ++requests_); }

  ServiceParts parts_;
  const ServiceOptions options_;
  StaticPage page_;
  httplib::Server server_;
  ConnectionCounts connections_;
  RequestMetrics metrics_;
  const std::int64_t start_ns_ = std::chrono::system_clock::now().time_since_epoch().count();
  std::atomic<std::uint64_t> requests_{0};
  std::atomic<bool> stopping_{false};
  int port_ = -1;
};

}  // namespace

Expected<std::unique_ptr<Service>> Service::open(ServiceParts parts, ServiceOptions options) {
  auto service = std::make_unique<HttplibService>(parts, std::move(options));
  if (auto bound = service->bind(); !bound) return failure(bound);
  return service;
}

}  // namespace bentlight::http
