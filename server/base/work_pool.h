// The one place where threads that compute are started.
#pragma once

#include <condition_variable>
#include <cstddef>
#include <deque>
#include <functional>
#include <mutex>
#include <stop_token>
#include <thread>
#include <vector>

#include "base/error.h"

namespace bentlight {

/// A fixed number of worker threads that take tasks in the order of their arrival.
///
///   threads  safe from any thread; tasks must not wait for tasks behind them (for_each does not)
class WorkPool {
 public:
  /// `on_start` runs in each worker before its first task, to set its priority for example.
  explicit WorkPool(std::size_t threads, const std::function<void()>& on_start = {});
  ~WorkPool();  // finishes what is queued
  WorkPool(const WorkPool&) = delete;
  WorkPool& operator=(const WorkPool&) = delete;

  std::size_t threads() const { return workers_.size(); }

  /// Calls `body(index, lane)` for every index below `count` on the workers and on the calling thread, each index
  /// once, and returns when all are done. `lane` is below lanes() and belongs to one thread at a time: scratch is
  /// kept per lane. Indices are taken in rising order. The first failure in index order is returned; after a
  /// failure or a stop no new index is begun.
  ///
  ///   errors  what `body` returns; cancelled when `stop` was requested
  ///   throws  what `body` throws, once all lanes have come to rest
  Expected<void> for_each(std::size_t count, const std::stop_token& stop,
                          const std::function<Expected<void>(std::size_t index, std::size_t lane)>& body);

  /// How many lanes for_each may use: the workers and the caller.
  std::size_t lanes() const { return workers_.size() + 1; }

  /// Runs `task` on a worker. It must not throw.
  void post(std::function<void()> task);

 private:
  void work();

  std::mutex mutex_;  // guards the members below
  std::condition_variable ready_;
  std::deque<std::function<void()>> tasks_;
  bool closing_ = false;

  std::vector<std::jthread> workers_;  // last, so that they end before what they use
};

}  // namespace bentlight
