#include "base/work_pool.h"

#include <gtest/gtest.h>

#include <atomic>
#include <chrono>
#include <future>
#include <stdexcept>
#include <thread>
#include <vector>

namespace bentlight {
namespace {

using namespace std::chrono_literals;

TEST(WorkPool, CallsEachIndexOnce) {
  for (const std::size_t threads : {0U, 1U, 3U}) {
    WorkPool pool(threads);
    for (const std::size_t count : {0U, 1U, 2U, 1000U}) {
      std::vector<std::atomic<int>> calls(count);

      const auto done = pool.for_each(count, {}, [&](std::size_t index, std::size_t) -> Expected<void> {
        ++calls[index];
        return {};
      });

      EXPECT_TRUE(done);
      for (const auto& call : calls) EXPECT_EQ(call, 1);
    }
  }
}

TEST(WorkPool, LendsALaneToOneThreadAtATime) {
  WorkPool pool(3);
  std::vector<std::atomic<int>> inside(pool.lanes());
  std::atomic<bool> shared{false};

  ASSERT_TRUE(pool.for_each(2000, {}, [&](std::size_t, std::size_t lane) -> Expected<void> {
    if (lane >= inside.size() || inside[lane]++ != 0) shared = true;
    std::this_thread::yield();
    --inside[lane];
    return {};
  }));

  EXPECT_FALSE(shared);
}

TEST(WorkPool, WorksOnSeveralThreadsAtOnce) {
  WorkPool pool(1);
  std::atomic<int> waiting{0};

  // Each index waits for the other: one thread alone would wait for ever.
  const auto done = pool.for_each(2, {}, [&](std::size_t, std::size_t) -> Expected<void> {
    ++waiting;
    for (int i = 0; i < 10'000 && waiting < 2; ++i) std::this_thread::sleep_for(1ms);
    if (waiting < 2) return failure(ErrorCode::timed_out, "alone");
    return {};
  });

  EXPECT_TRUE(done);
}

TEST(WorkPool, GivesTheFailureOfTheLowestIndex) {
  WorkPool pool(3);
  for (int trial = 0; trial < 50; ++trial) {
    const auto done = pool.for_each(100, {}, [&](std::size_t index, std::size_t) -> Expected<void> {
      if (index % 10 == 5) return failure(ErrorCode::io_error, std::to_string(index));
      return {};
    });

    // Indices are taken in rising order, and 5 is taken before any other that fails.
    ASSERT_FALSE(done);
    EXPECT_EQ(done.error().text, "5");
  }
}

TEST(WorkPool, BeginsNothingNewAfterAFailure) {
  WorkPool pool(1);
  std::atomic<std::size_t> begun{0};

  static_cast<void>(pool.for_each(100'000, {}, [&](std::size_t, std::size_t) -> Expected<void> {
    ++begun;
    return failure(ErrorCode::io_error, "no");
  }));

  EXPECT_LE(begun, pool.lanes());
}

TEST(WorkPool, StopsWhenAsked) {
  WorkPool pool(1);
  std::stop_source source;
  std::atomic<std::size_t> begun{0};

  const auto done =
      pool.for_each(100'000, source.get_token(), [&](std::size_t, std::size_t) -> Expected<void> {
        if (++begun == 10) source.request_stop();
        return {};
      });

  ASSERT_FALSE(done);
  EXPECT_EQ(done.error().code, ErrorCode::cancelled);
  EXPECT_LE(begun, 10 + pool.lanes());
}

TEST(WorkPool, ThrowsWhatTheBodyThrows) {
  WorkPool pool(2);
  const auto work = [&] {
    return pool.for_each(100, {}, [&](std::size_t index, std::size_t) -> Expected<void> {
      if (index == 3) throw std::invalid_argument("a fault");
      return {};
    });
  };

  EXPECT_THROW(static_cast<void>(work()), std::invalid_argument);
  // The pool is as good as new.
  EXPECT_TRUE(pool.for_each(10, {}, [](std::size_t, std::size_t) -> Expected<void> { return {}; }));
}

TEST(WorkPool, MayBeUsedFromItsOwnTasks) {
  WorkPool pool(1);
  std::promise<bool> inner;

  pool.post([&] {
    const auto done = pool.for_each(50, {}, [&](std::size_t, std::size_t) -> Expected<void> { return {}; });
    inner.set_value(done.has_value());
  });

  auto result = inner.get_future();
  ASSERT_EQ(result.wait_for(10s), std::future_status::ready);
  EXPECT_TRUE(result.get());
}

// Helpers that come late to a loop that is over are still queued when the pool ends.
TEST(WorkPool, EndsWhileHelpersAreQueued) {
  for (int trial = 0; trial < 300; ++trial) {
    WorkPool pool(3);
    ASSERT_TRUE(pool.for_each(4, {}, [](std::size_t, std::size_t) -> Expected<void> { return {}; }));
  }
}

TEST(WorkPool, FinishesWhatIsQueuedBeforeItEnds) {
  std::atomic<int> done{0};
  {
    WorkPool pool(2);
    for (int i = 0; i < 100; ++i) pool.post([&] { ++done; });
  }
  EXPECT_EQ(done, 100);
}

TEST(WorkPool, PreparesEachWorker) {
  std::atomic<int> prepared{0};
  {
    WorkPool pool(3, [&] { ++prepared; });
  }
  EXPECT_EQ(prepared, 3);
}

}  // namespace
}  // namespace bentlight
