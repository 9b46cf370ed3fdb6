// The log: one JSON object a line, on a stream that is passed in.
#pragma once

#include <cstdio>
#include <initializer_list>
#include <mutex>
#include <string>
#include <string_view>
#include <utility>

namespace bentlight {

/// threads  safe from any thread; lines never mix
class Log {
 public:
  explicit Log(std::FILE* stream) : stream_(stream) {}

  using Field = std::pair<std::string_view, std::string>;
  void info(std::string_view event, std::initializer_list<Field> fields = {}) { write("info", event, fields); }
  void warning(std::string_view event, std::initializer_list<Field> fields = {}) { write("warning", event, fields); }
  void error(std::string_view event, std::initializer_list<Field> fields = {}) { write("error", event, fields); }

 private:
  void write(std::string_view level, std::string_view event, std::initializer_list<Field> fields);

  std::mutex mutex_;  // guards the stream
  std::FILE* stream_;
};

}  // namespace bentlight
