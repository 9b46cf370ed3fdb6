#include "base/log.h"

#include <chrono>
#include <ctime>

#include <fmt/chrono.h>
#include <fmt/format.h>

#include "base/text.h"

namespace bentlight {

void Log::write(std::string_view level, std::string_view event, std::initializer_list<Field> fields) {
  const auto now = std::chrono::system_clock::now();
  const auto milliseconds =
      std::chrono::duration_cast<std::chrono::milliseconds>(now.time_since_epoch()).count() % 1000;
  std::string line = fmt::format(R"({{"time":"{:%Y-%m-%dT%H:%M:%S}.{:03}Z","level":"{}","event":{})",
                                 fmt::gmtime(std::chrono::system_clock::to_time_t(now)), milliseconds, level,
                                 json_quoted(event));
  for (const auto& [field, value] : fields) line += fmt::format(",{}:{}", json_quoted(field), json_quoted(value));
  line += "}\n";
  const std::lock_guard lock(mutex_);
  std::fwrite(line.data(), 1, line.size(), stream_);
  std::fflush(stream_);
}

}  // namespace bentlight
