// What a handler gives back, before it becomes bytes on a connection.
#pragma once

#include <functional>
#include <memory>
#include <string>
#include <utility>
#include <vector>

#include "base/error.h"

namespace bentlight::http {

struct Reply {
  int status = 200;
  std::string content_type = "application/json";
  std::shared_ptr<const std::string> body;
  std::string etag;           // without quotes; empty: the reply is not conditional
  bool is_immutable = false;  // a permalink: these bytes never change
  std::vector<std::pair<std::string, std::string>> headers;

  /// For event streams: fills the next piece and says whether more may come. It blocks for at most a few seconds.
  std::function<bool(std::string& piece)> stream;
};

inline Reply json_reply(std::string text) {
  return {.body = std::make_shared<const std::string>(std::move(text))};
}

/// HTTP status of an error. One switch without a default: a new code stops the build until someone has decided.
int status_of(ErrorCode code);

/// An error as RFC 9457 problem details. `instance` names the request for the log.
Reply problem_reply(const Error& error, const std::string& instance);

}  // namespace bentlight::http
