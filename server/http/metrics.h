// Counters for a dashboard, in the OpenMetrics text format.
#pragma once

#include <array>
#include <chrono>
#include <cstdint>
#include <map>
#include <mutex>
#include <string>
#include <utility>

namespace bentlight::http {

/// Requests by route and status, with latencies.
///
///   threads  safe from any thread
class RequestMetrics {
 public:
  void record(const std::string& route, int status, std::chrono::duration<double> seconds, std::uint64_t bytes);

  /// Appends the metric families to `text`.
  void write(std::string& text) const;

 private:
  static constexpr std::array bounds_s = {0.001, 0.005, 0.02, 0.1, 0.5, 2.0, 10.0};
  struct Latency {
    std::array<std::uint64_t, bounds_s.size() + 1> counts{};
    double sum_s = 0.0;
  };
  mutable std::mutex mutex_;  // guards the members below
  std::map<std::pair<std::string, int>, std::uint64_t> requests_;
  std::map<std::string, Latency> latency_;
  std::uint64_t bytes_sent_ = 0;
};

/// Appends one gauge or counter with its help line. A counter's sample name gets the suffix _total.
void write_gauge(std::string& text, const std::string& name, const std::string& help, double value);
void write_counter(std::string& text, const std::string& name, const std::string& help, double value);

}  // namespace bentlight::http
