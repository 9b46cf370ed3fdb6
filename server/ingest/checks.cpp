#include "ingest/checks.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>

namespace bentlight::ingest {

namespace {

class Checks {
 public:
  void found(std::string_view code, std::string_view severity, double figure, std::string text) {
    json_.push_back({{"code", code}, {"severity", severity}, {"figure", figure}, {"text", std::move(text)}});
  }
  std::string text() const { return json_.dump(); }

 private:
  nlohmann::ordered_json json_ = nlohmann::ordered_json::array();
};

void check_frames(const index::SummaryData& summary, Checks& checks) {
  const auto finite = static_cast<std::size_t>(std::ranges::count(summary.finite, 1));
  const std::size_t missing = summary.frames - finite;
  if (missing > 0) {
    checks.found("frames-with-nan", "warning",
                 static_cast<double>(missing) / static_cast<double>(summary.frames),
                 fmt::format("{} of {} frames hold NaN inside the aperture and are left out.", missing,
                             summary.frames));
  }
  // Two frames alike in every coefficient and in what is left are one frame stored twice.
  std::size_t repeated = 0;
  for (std::size_t t = 1; t < summary.frames; ++t) {
    bool is_same =
        summary.finite[t] && summary.finite[t - 1] && summary.residual[t] == summary.residual[t - 1];
    for (std::size_t k = 0; is_same && k < summary.modes; ++k) {
      const double* row = summary.coefficients.data() + k * summary.frames;
      is_same = row[t] == row[t - 1];
    }
    repeated += is_same;
  }
  if (repeated > 0) {
    checks.found("repeated-frames", "warning", static_cast<double>(repeated),
                 fmt::format("{} frames repeat the one before them bit by bit.", repeated));
  }
}

void check_clock(const archive::WavefrontFile& file, Checks& checks) {
  if (file.time_s.size() < 3) return;
  const double step_s = 1.0 / file.frame_rate_hz;
  std::size_t gaps = 0;
  double lost = 0.0, worst = 0.0;
  for (std::size_t t = 1; t < file.time_s.size(); ++t) {
    const double steps = (file.time_s[t] - file.time_s[t - 1]) / step_s;
    if (steps > 1.5) {
      ++gaps;
      lost += std::round(steps) - 1.0;
    } else {
      worst = std::max(worst, std::abs(steps - 1.0));
    }
  }
  if (gaps > 0) {
    checks.found("dropped-frames", "warning", lost,
                 fmt::format("The clock jumps {} times; about {} frames were dropped.", gaps, lost));
  }
  if (worst > 1e-3) {
    checks.found("irregular-clock", "warning", worst,
                 fmt::format("Steps of the clock differ by up to {:.2g} of a step.", worst));
  }
}

void check_points(std::size_t dead, std::size_t points, Checks& checks) {
  if (dead == 0) return;
  checks.found("dead-points", "warning", static_cast<double>(dead),
               fmt::format("{} of {} points do not move at all and are probably dead.", dead, points));
}

}  // namespace

std::string checks_json(const archive::WavefrontFile& file,
                        const index::SummaryData& summary,
                        std::size_t dead_points) {
  Checks checks;
  check_frames(summary, checks);
  check_clock(file, checks);
  check_points(dead_points, summary.points, checks);
  return checks.text();
}

}  // namespace bentlight::ingest
