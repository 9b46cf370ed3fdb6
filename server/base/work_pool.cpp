#include "base/work_pool.h"

#include <atomic>
#include <exception>
#include <memory>
#include <optional>

namespace bentlight {

WorkPool::WorkPool(std::size_t threads, const std::function<void()>& on_start) {
  workers_.reserve(threads);
  for (std::size_t i = 0; i < threads; ++i) {
    workers_.emplace_back([this, on_start] {
      if (on_start) on_start();
      work();
    });
  }
}

WorkPool::~WorkPool() {
  {
    const std::lock_guard lock(mutex_);
    closing_ = true;
  }
  ready_.notify_all();
}

void WorkPool::work() {
  while (true) {
    std::function<void()> task;
    {
      std::unique_lock lock(mutex_);
      ready_.wait(lock, [this] { return closing_ || !tasks_.empty(); });
      if (tasks_.empty()) return;
      task = std::move(tasks_.front());
      tasks_.pop_front();
    }
    task();
  }
}

void WorkPool::post(std::function<void()> task) {
  {
    const std::lock_guard lock(mutex_);
    tasks_.push_back(std::move(task));
  }
  ready_.notify_one();
}

namespace {

/// What the lanes of one for_each share. It outlives the call, since a helper that was queued behind other work may
/// arrive after the caller has done everything; such a helper finds the door closed and touches nothing else.
struct Loop {
  std::size_t count = 0;
  std::atomic<std::size_t> next{0};
  std::atomic<bool> halted{false};

  std::mutex mutex;  // guards the members below
  std::condition_variable idle;
  const std::function<Expected<void>(std::size_t, std::size_t)>* body = nullptr;  // null once the door is closed
  std::size_t lanes_inside = 0;
  std::size_t lanes_given = 0;
  std::size_t failed_index = 0;
  std::optional<Error> error;
  std::exception_ptr exception;

  void run(const std::stop_token& stop, std::size_t lane) {
    while (!halted.load(std::memory_order_relaxed) && !stop.stop_requested()) {
      const std::size_t index = next.fetch_add(1, std::memory_order_relaxed);
      if (index >= count) return;
      try {
        Expected<void> done = (*body)(index, lane);
        if (!done) fail(index, std::move(done.error()));
      } catch (...) {
        halted = true;
        const std::lock_guard lock(mutex);
        if (!exception) exception = std::current_exception();
      }
    }
  }

  void fail(std::size_t index, Error failed) {
    halted = true;
    const std::lock_guard lock(mutex);
    if (error && failed_index < index) return;
    failed_index = index;
    error = std::move(failed);
  }
};

}  // namespace

Expected<void> WorkPool::for_each(std::size_t count, const std::stop_token& stop,
                                  const std::function<Expected<void>(std::size_t, std::size_t)>& body) {
  const auto loop = std::make_shared<Loop>();
  loop->count = count;
  loop->body = &body;
  loop->lanes_inside = 1;
  loop->lanes_given = 1;

  const std::size_t helpers = count > 1 ? std::min(workers_.size(), count - 1) : 0;
  for (std::size_t i = 0; i < helpers; ++i) {
    post([loop, stop] {
      std::size_t lane = 0;
      {
        const std::lock_guard lock(loop->mutex);
        if (loop->body == nullptr) return;
        lane = loop->lanes_given++;
        ++loop->lanes_inside;
      }
      loop->run(stop, lane);
      const std::lock_guard lock(loop->mutex);
      if (--loop->lanes_inside == 0) loop->idle.notify_all();
    });
  }
  loop->run(stop, 0);

  std::unique_lock lock(loop->mutex);
  --loop->lanes_inside;
  loop->idle.wait(lock, [&] { return loop->lanes_inside == 0; });
  loop->body = nullptr;
  if (loop->exception) std::rethrow_exception(loop->exception);
  if (loop->error) return tl::unexpected<Error>(*loop->error);
  if (stop.stop_requested()) return failure(ErrorCode::cancelled, "the work was cancelled");
  return {};
}

}  // namespace bentlight
