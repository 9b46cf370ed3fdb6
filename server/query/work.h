// What a computation is handed besides its question: hands, a way to be stopped, and a place to say how far it is.
#pragma once

#include <atomic>
#include <cstdint>
#include <functional>
#include <memory>
#include <stop_token>
#include <string>

#include "base/error.h"
#include "base/work_pool.h"
#include "query/parameter.h"
#include "query/result.h"

namespace bentlight::query {

/// How far a computation is. Written by lanes, read by whoever shows it.
struct Progress {
  std::atomic<std::uint64_t> done{0};   // bytes of frames read, or views answered
  std::atomic<std::uint64_t> total{0};
};

/// Answers a question inside a question, through the same cache: a field of regard asks one per view.
using Ask = std::function<Expected<std::shared_ptr<const Result>>(
    const std::string& view, const std::string& analysis, const RawParameters& parameters, WorkPool& pool,
    const std::stop_token& stop)>;

struct Work {
  WorkPool& pool;
  std::stop_token stop;
  Progress& progress;
  const Ask& ask;
};

}  // namespace bentlight::query
