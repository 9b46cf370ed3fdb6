#include "http/metrics.h"

#include <fmt/format.h>

#include "base/text.h"

namespace bentlight::http {

void RequestMetrics::record(const std::string& route, int status, std::chrono::duration<double> seconds,
                            std::uint64_t bytes) {
  std::size_t bin = 0;
  while (bin < bounds_s.size() && seconds.count() > bounds_s[bin]) ++bin;
  const std::lock_guard lock(mutex_);
  ++requests_[{route, status}];
  Latency& latency = latency_[route];
  ++latency.counts[bin];
  latency.sum_s += seconds.count();
  bytes_sent_ += bytes;
}

void RequestMetrics::write(std::string& text) const {
  const std::lock_guard lock(mutex_);
  text += "# TYPE bentlight_requests counter\n# HELP bentlight_requests Requests by route and status.\n";
  for (const auto& [key, count] : requests_) {
    text += fmt::format("bentlight_requests_total{{route=\"{}\",status=\"{}\"}} {}\n", key.first, key.second, count);
  }
  text += "# TYPE bentlight_request_seconds histogram\n# UNIT bentlight_request_seconds seconds\n"
          "# HELP bentlight_request_seconds Time from request to reply, by route.\n";
  for (const auto& [route, latency] : latency_) {
    std::uint64_t below = 0;
    for (std::size_t bin = 0; bin <= bounds_s.size(); ++bin) {
      below += latency.counts[bin];
      const std::string bound = bin < bounds_s.size() ? shortest(bounds_s[bin]) : "+Inf";
      text += fmt::format("bentlight_request_seconds_bucket{{route=\"{}\",le=\"{}\"}} {}\n", route, bound, below);
    }
    text += fmt::format("bentlight_request_seconds_count{{route=\"{0}\"}} {1}\n"
                        "bentlight_request_seconds_sum{{route=\"{0}\"}} {2}\n",
                        route, below, shortest(latency.sum_s));
  }
  write_counter(text, "bentlight_sent_bytes", "Bytes of reply bodies.", static_cast<double>(bytes_sent_));
}

void write_gauge(std::string& text, const std::string& name, const std::string& help, double value) {
  text += fmt::format("# TYPE {0} gauge\n# HELP {0} {1}\n{0} {2}\n", name, help, shortest(value));
}

void write_counter(std::string& text, const std::string& name, const std::string& help, double value) {
  text += fmt::format("# TYPE {0} counter\n# HELP {0} {1}\n{0}_total {2}\n", name, help, shortest(value));
}

}  // namespace bentlight::http
