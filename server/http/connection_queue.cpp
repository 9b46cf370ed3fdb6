#include "http/connection_queue.h"

#include <stdexcept>

namespace bentlight::http {

ConnectionQueue::ConnectionQueue(std::size_t most_threads, ConnectionCounts& counts)
    : most_threads_(most_threads), counts_(counts) {}

ConnectionQueue::~ConnectionQueue() { shutdown(); }

void ConnectionQueue::enqueue(std::function<void()> serve) {
  const std::lock_guard lock(mutex_);
  if (closing_) return;
  // Beyond the bound a connection waits its turn: keep-alive is short, so that a turn comes within seconds, and the
  // service tells clients to close when threads run out (HttpService).
  waiting_.push_back(std::move(serve));
  ++counts_.taken;
  if (idle_threads_ < waiting_.size() && threads_.size() < most_threads_) {
    pthread_attr_t attributes;
    pthread_attr_init(&attributes);
    // Routing uses std::regex, whose recursion needs some depth; bodies are never on the stack.
    pthread_attr_setstacksize(&attributes, 512 * 1024);
    pthread_t thread{};
    if (pthread_create(&thread, &attributes, &thread_main, this) == 0) threads_.push_back(thread);
    pthread_attr_destroy(&attributes);
    if (threads_.empty()) throw std::runtime_error("ConnectionQueue: the system gives no thread");
  }
  ready_.notify_one();
}

void* ConnectionQueue::thread_main(void* queue) {
  static_cast<ConnectionQueue*>(queue)->serve_connections();
  return nullptr;
}

void ConnectionQueue::serve_connections() {
  while (true) {
    std::function<void()> serve;
    {
      std::unique_lock lock(mutex_);
      ++idle_threads_;
      ready_.wait(lock, [this] { return closing_ || !waiting_.empty(); });
      --idle_threads_;
      if (waiting_.empty()) return;
      serve = std::move(waiting_.front());
      waiting_.pop_front();
    }
    ++counts_.open;
    serve();
    --counts_.open;
  }
}

void ConnectionQueue::shutdown() {
  std::vector<pthread_t> threads;
  {
    const std::lock_guard lock(mutex_);
    closing_ = true;
    threads.swap(threads_);
  }
  ready_.notify_all();
  for (const pthread_t thread : threads) pthread_join(thread, nullptr);
}

}  // namespace bentlight::http
