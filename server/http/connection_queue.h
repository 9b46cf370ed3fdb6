// One thread per open connection, as the HTTP library works, but bounded: at the bound a connection is closed at once
// instead of waiting for seconds behind idle ones.
#pragma once

#include <atomic>
#include <condition_variable>
#include <cstddef>
#include <deque>
#include <functional>
#include <mutex>
#include <vector>

#include <httplib.h>
#include <pthread.h>

namespace bentlight::http {

/// Counts that outlive the queue, which the HTTP library owns.
struct ConnectionCounts {
  std::atomic<std::size_t> open{0};
  std::atomic<std::uint64_t> taken{0};
};

/// Threads are started as connections need them and keep small stacks: they parse and write, and compute nothing.
class ConnectionQueue final : public httplib::TaskQueue {
 public:
  ConnectionQueue(std::size_t most_threads, ConnectionCounts& counts);
  ~ConnectionQueue() override;

  void enqueue(std::function<void()> serve) override;
  void shutdown() override;

 private:
  static void* thread_main(void* queue);
  void serve_connections();

  const std::size_t most_threads_;
  ConnectionCounts& counts_;

  std::mutex mutex_;  // guards the members below
  std::condition_variable ready_;
  std::deque<std::function<void()>> waiting_;
  std::vector<pthread_t> threads_;
  std::size_t idle_threads_ = 0;
  bool closing_ = false;
};

}  // namespace bentlight::http
