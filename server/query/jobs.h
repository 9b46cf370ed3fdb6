// Jobs: every computation is one, whether somebody waits for it or not. Equal questions join the same job.
#pragma once

#include <algorithm>
#include <chrono>
#include <condition_variable>
#include <cstdint>
#include <deque>
#include <functional>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <stop_token>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/work_pool.h"
#include "query/analysis.h"
#include "query/result.h"
#include "query/work.h"

namespace bentlight::query {

enum class JobState { queued, running, done, failed, cancelled };
std::string_view name(JobState state);

/// A job as it is at one moment.
struct JobStatus {
  std::string id;  // the digest of the question
  std::string analysis, subject;
  JobState state = JobState::queued;
  std::uint64_t done = 0, total = 0;  // in bytes of frames, or views
  double seconds_running = 0.0;
  std::optional<double> seconds_left;  // at the rate so far
  std::optional<Error> error;
  std::uint64_t revision = 0;  // rises with each change of state

  bool is_over() const { return state != JobState::queued && state != JobState::running; }
  double fraction() const {
    if (state == JobState::done) return 1.0;
    return total == 0 ? 0.0 : std::min(1.0, static_cast<double>(done) / static_cast<double>(total));
  }
};

/// One computation. Its result lives as long as somebody holds the job; Jobs itself remembers an epitaph without it.
class Job {
 public:
  using Compute = std::function<Expected<std::shared_ptr<const Result>>(WorkPool&, const std::stop_token&, Progress&)>;

  Job(std::string id, std::string analysis, std::string subject, const Plan& plan, Compute compute);

  /// A job that is over, as it is remembered: everything but its result and what it computed with.
  static std::shared_ptr<Job> epitaph(const Job& over);

  const std::string& id() const { return id_; }
  JobStatus status() const;
  void cancel();

  /// Waits until the job is over, or `patience` has passed. The result, the job's error, or nothing when it goes on.
  std::optional<Expected<std::shared_ptr<const Result>>> wait(std::chrono::milliseconds patience) const;

  /// Waits until the state has another revision than `seen`, is over, or `patience` has passed.
  JobStatus wait_for_news(std::uint64_t seen, std::chrono::milliseconds patience) const;

 private:
  friend class Jobs;
  void run(WorkPool& pool);
  void finish(Expected<std::shared_ptr<const Result>> outcome);

  const std::string id_, analysis_, subject_;
  const Plan plan_;
  const Compute compute_;

  std::stop_source stop_;
  Progress progress_;

  mutable std::mutex mutex_;  // guards the members below
  mutable std::condition_variable changed_;
  JobState state_ = JobState::queued;
  std::uint64_t revision_ = 0;
  std::chrono::steady_clock::time_point started_, ended_;
  std::optional<Expected<std::shared_ptr<const Result>>> outcome_;
};

struct JobLimits {
  std::size_t memory_bytes;        // of all running questions together
  std::size_t question_bytes;      // of one
  std::size_t queued;              // beyond this a question is refused
  std::size_t long_at_once;        // long jobs that run at the same time
  std::uint64_t interactive_bytes;  // decoded bytes up to which a question is answered while one waits
};

/// Admits, runs and remembers jobs. Questions within the interactive budget run on one pool, long ones on another of
/// lower priority, so that a scan of a terabyte does not hold up a dashboard.
///
///   threads  safe from any thread
class Jobs {
 public:
  Jobs(WorkPool& interactive, WorkPool& patient, JobLimits limits);
  ~Jobs();  // cancels what runs and waits for it

  struct Ticket {
    std::shared_ptr<Job> job;
    bool is_long = false;
  };

  /// The job that answers question `id`: the one under way, or a new one.
  ///
  ///   errors  memory_budget when the plan needs more than one question may; overloaded when the queue is full;
  ///           shutting_down
  Expected<Ticket> join(const std::string& id, const std::string& analysis, const std::string& subject,
                        const Plan& plan, Job::Compute compute);

  /// errors  unknown_job
  Expected<std::shared_ptr<Job>> find(const std::string& id) const;

  struct Counts {
    std::size_t queued = 0, running = 0;
    std::uint64_t finished = 0, failed = 0, cancelled = 0, refused = 0, joined = 0;
    std::size_t memory_bytes = 0;
  };
  Counts counts() const;

  /// Refuses new jobs, cancels the rest, and returns when nothing runs.
  void close();

 private:
  struct Entry {
    std::shared_ptr<Job> job;
    Plan plan;
    bool is_long = false;
    bool is_running = false;
  };
  bool is_long(const Plan& plan) const;
  void dispatch();                       // needs mutex_
  void begin(const std::shared_ptr<Entry>& entry);  // needs mutex_
  void ended(const std::shared_ptr<Entry>& entry);
  void forget_old();                     // needs mutex_

  WorkPool& interactive_;
  WorkPool& patient_;
  const JobLimits limits_;

  mutable std::mutex mutex_;  // guards the members below
  std::condition_variable idle_;
  std::map<std::string, std::shared_ptr<Entry>> by_id_;
  std::deque<std::shared_ptr<Entry>> waiting_;
  std::deque<std::string> over_;  // oldest first
  std::size_t running_long_ = 0, running_ = 0;
  Counts counts_;
  bool closed_ = false;
};

}  // namespace bentlight::query
