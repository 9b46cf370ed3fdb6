// The HTTP edge: one server, its routes, limits and counters.
#pragma once

#include <atomic>
#include <filesystem>
#include <memory>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/file.h"
#include "base/log.h"
#include "http/route.h"
#include "ingest/indexer.h"
#include "query/engine.h"
#include "query/lists.h"

namespace bentlight::http {

struct ServiceOptions {
  std::string host = "127.0.0.1";
  int port = 8787;  // 0: any free one
  std::filesystem::path page;    // folder of the static page
  std::filesystem::path vendor;  // folder of its third-party files, served under /vendor/
  std::size_t connections = 1024;
};

/// What the routes speak to; all owned by main and outliving the service.
struct ServiceParts {
  query::Engine& engine;
  const query::Lists& lists;
  query::Jobs& jobs;
  query::ResultCache& cache;
  const ingest::Indexer& indexer;
  const FileSystem& files;
  Log& log;
};

/// threads  stop() from any thread; the rest from one
class Service {
 public:
  /// errors  bad_option when the address is not loopback (nothing is served beyond it without authentication) or is
  ///         taken
  static Expected<std::unique_ptr<Service>> open(ServiceParts parts, ServiceOptions options);
  virtual ~Service() = default;

  virtual int port() const = 0;
  /// Serves until stop().
  virtual void run() = 0;
  virtual void stop() = 0;
};

/// The route table, for the server and for the printed description. `metrics` answers /metrics, whose counters are the
/// server's own.
std::vector<Route> service_routes(ServiceParts parts, Handler metrics);

/// OpenAPI 3.1 of the routes and the analyses.
std::string openapi_description(const std::vector<Route>& routes, const query::Catalogue& catalogue);

}  // namespace bentlight::http
