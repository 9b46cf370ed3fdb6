// Routes as a table: the server registers it, the OpenAPI description is printed from it.
#pragma once

#include <functional>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"
#include "http/reply.h"
#include "query/parameter.h"

namespace bentlight::http {

/// A request after the edge has taken it apart.
struct Request {
  std::string method;
  std::string target;                                  // path and query as sent, for links
  std::string path;
  std::vector<std::string> arguments;                  // what stood for {…} in the route's path, in order
  query::RawParameters parameters;                     // of the query string
  std::map<std::string, std::string, std::less<>> headers;  // names in lower case
  std::string id;                                      // for the log and problem documents

  std::string_view header(std::string_view name) const {
    const auto found = headers.find(name);
    return found == headers.end() ? std::string_view() : std::string_view(found->second);
  }
};

using Handler = std::function<Expected<Reply>(const Request&)>;

/// What a reply holds, for the description.
struct DescribedReply {
  int status = 200;
  std::string summary;
  std::string schema;                    // a name under components/schemas; empty for text
  std::vector<std::string> media_types = {"application/json"};
};

struct Route {
  std::string method = "GET";
  std::string path;  // "/v1/views/{view}"
  std::string name;  // operationId and label in the metrics
  std::string summary;
  std::vector<query::Parameter> parameters = {};
  std::vector<DescribedReply> replies = {};
  Handler handler;
};

}  // namespace bentlight::http
