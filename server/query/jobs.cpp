#include "query/jobs.h"

#include <algorithm>
#include <exception>

#include <fmt/format.h>

namespace bentlight::query {

std::string_view name(JobState state) {
  switch (state) {
    case JobState::queued:
      return "queued";
    case JobState::running:
      return "running";
    case JobState::done:
      return "done";
    case JobState::failed:
      return "failed";
    case JobState::cancelled:
      return "cancelled";
  }
  throw std::logic_error("name: a state without a name");
}

Job::Job(std::string id, std::string analysis, std::string subject, const Plan& plan, Compute compute)
    : id_(std::move(id)),
      analysis_(std::move(analysis)),
      subject_(std::move(subject)),
      plan_(plan),
      compute_(std::move(compute)) {
  progress_.total = plan.stored_bytes;
}

std::shared_ptr<Job> Job::epitaph(const Job& over) {
  auto epitaph = std::make_shared<Job>(over.id_, over.analysis_, over.subject_, over.plan_, nullptr);
  epitaph->progress_.done = over.progress_.done.load();
  epitaph->progress_.total = over.progress_.total.load();
  const std::lock_guard lock(over.mutex_);
  epitaph->state_ = over.state_;
  epitaph->revision_ = over.revision_;
  epitaph->started_ = over.started_;
  epitaph->ended_ = over.ended_;
  epitaph->outcome_ = over.outcome_->map([](const auto&) { return std::shared_ptr<const Result>(); });
  return epitaph;
}

JobStatus Job::status() const {
  const std::lock_guard lock(mutex_);
  JobStatus status{.id = id_,
                   .analysis = analysis_,
                   .subject = subject_,
                   .state = state_,
                   .done = progress_.done.load(),
                   .total = progress_.total.load(),
                   .revision = revision_};
  if (state_ != JobState::queued) {
    const auto until = outcome_ ? ended_ : std::chrono::steady_clock::now();
    status.seconds_running = std::chrono::duration<double>(until - started_).count();
  }
  if (state_ == JobState::running && status.fraction() > 0.01) {
    status.seconds_left = status.seconds_running * (1.0 / status.fraction() - 1.0);
  }
  if (outcome_ && !*outcome_) status.error = outcome_->error();
  return status;
}

void Job::cancel() {
  stop_.request_stop();
  const std::lock_guard lock(mutex_);
  if (state_ == JobState::queued) {
    state_ = JobState::cancelled;
    ++revision_;
    started_ = ended_ = std::chrono::steady_clock::now();
    outcome_ = failure(ErrorCode::cancelled, "the job was cancelled before it began", id_);
    changed_.notify_all();
  }
}

std::optional<Expected<std::shared_ptr<const Result>>> Job::wait(std::chrono::milliseconds patience) const {
  std::unique_lock lock(mutex_);
  changed_.wait_for(lock, patience, [this] { return outcome_.has_value(); });
  return outcome_;
}

JobStatus Job::wait_for_news(std::uint64_t seen, std::chrono::milliseconds patience) const {
  {
    std::unique_lock lock(mutex_);
    changed_.wait_for(lock, patience, [&] { return revision_ != seen || outcome_.has_value(); });
  }
  return status();
}

void Job::run(WorkPool& pool) {
  {
    const std::lock_guard lock(mutex_);
    if (outcome_) return;  // cancelled while it waited
    state_ = JobState::running;
    ++revision_;
    started_ = std::chrono::steady_clock::now();
    changed_.notify_all();
  }
  // The one place around a computation where faults of the program become an answer: they cost this question only.
  try {
    finish(compute_(pool, stop_.get_token(), progress_));
  } catch (const std::bad_alloc&) {
    finish(failure(ErrorCode::memory_budget, "memory ran out while this was computed", id_));
  } catch (const std::exception& fault) {
    finish(failure(ErrorCode::internal, fmt::format("a fault of the program: {}", fault.what()), id_));
  }
}

void Job::finish(Expected<std::shared_ptr<const Result>> outcome) {
  const std::lock_guard lock(mutex_);
  state_ = outcome                                             ? JobState::done
           : outcome.error().code == ErrorCode::cancelled      ? JobState::cancelled
                                                               : JobState::failed;
  ++revision_;
  ended_ = std::chrono::steady_clock::now();
  outcome_ = std::move(outcome);
  changed_.notify_all();
}

Jobs::Jobs(WorkPool& interactive, WorkPool& patient, JobLimits limits)
    : interactive_(interactive), patient_(patient), limits_(limits) {}

Jobs::~Jobs() { close(); }

bool Jobs::is_long(const Plan& plan) const { return plan.is_long || plan.decoded_bytes > limits_.interactive_bytes; }

Expected<Jobs::Ticket> Jobs::join(const std::string& id, const std::string& analysis, const std::string& subject,
                                  const Plan& plan, Job::Compute compute) {
  const std::lock_guard lock(mutex_);
  if (closed_) return failure(ErrorCode::shutting_down, "the service is stopping; ask again in a moment");
  if (const auto found = by_id_.find(id); found != by_id_.end()) {
    const JobState state = found->second->job->status().state;
    if (state == JobState::queued || state == JobState::running) {
      ++counts_.joined;
      return Ticket{found->second->job, found->second->is_long};
    }
    // A job that is over answers nobody anew: what it found is in the cache, and what failed is tried again.
    by_id_.erase(found);
  }
  if (plan.memory_bytes > limits_.question_bytes) {
    ++counts_.refused;
    return failure(ErrorCode::memory_budget,
                   fmt::format("this question needs {} MiB of memory; one may take {} MiB", plan.memory_bytes >> 20,
                               limits_.question_bytes >> 20));
  }
  if (waiting_.size() >= limits_.queued) {
    ++counts_.refused;
    return failure(ErrorCode::overloaded, fmt::format("{} questions are waiting already", waiting_.size()));
  }
  auto entry = std::make_shared<Entry>();
  entry->job = std::make_shared<Job>(id, analysis, subject, plan, std::move(compute));
  entry->plan = plan;
  entry->is_long = is_long(plan);
  by_id_.emplace(id, entry);
  waiting_.push_back(entry);
  dispatch();
  return Ticket{entry->job, entry->is_long};
}

void Jobs::dispatch() {
  for (auto at = waiting_.begin(); at != waiting_.end();) {
    const Entry& entry = **at;
    const bool has_memory = counts_.memory_bytes + entry.plan.memory_bytes <= limits_.memory_bytes || running_ == 0;
    const bool has_turn = !entry.is_long || running_long_ < limits_.long_at_once;
    if (has_memory && has_turn) {
      begin(*at);
      at = waiting_.erase(at);
    } else {
      ++at;
    }
  }
}

void Jobs::begin(const std::shared_ptr<Entry>& entry) {
  entry->is_running = true;
  counts_.memory_bytes += entry->plan.memory_bytes;
  ++running_;
  if (entry->is_long) ++running_long_;
  WorkPool& pool = entry->is_long ? patient_ : interactive_;
  pool.post([this, entry, &pool] {
    entry->job->run(pool);
    ended(entry);
  });
}

void Jobs::ended(const std::shared_ptr<Entry>& entry) {
  const std::lock_guard lock(mutex_);
  counts_.memory_bytes -= entry->plan.memory_bytes;
  --running_;
  if (entry->is_long) --running_long_;
  switch (entry->job->status().state) {
    case JobState::done:
      ++counts_.finished;
      break;
    case JobState::cancelled:
      ++counts_.cancelled;
      break;
    default:
      ++counts_.failed;
  }
  entry->job = Job::epitaph(*entry->job);
  over_.push_back(entry->job->id());
  forget_old();
  dispatch();
  idle_.notify_all();
}

void Jobs::forget_old() {
  constexpr std::size_t remembered = 1000;  // enough for a page that comes back after lunch
  while (over_.size() > remembered) {
    const auto found = by_id_.find(over_.front());
    if (found != by_id_.end() && found->second->job->status().is_over()) by_id_.erase(found);
    over_.pop_front();
  }
}

Expected<std::shared_ptr<Job>> Jobs::find(const std::string& id) const {
  const std::lock_guard lock(mutex_);
  const auto found = by_id_.find(id);
  if (found == by_id_.end()) {
    return failure(ErrorCode::unknown_job, "no such job is remembered: it never was, or it ended long ago", id);
  }
  return found->second->job;
}

Jobs::Counts Jobs::counts() const {
  const std::lock_guard lock(mutex_);
  Counts counts = counts_;
  counts.queued = waiting_.size();
  counts.running = running_;
  return counts;
}

void Jobs::close() {
  std::unique_lock lock(mutex_);
  closed_ = true;
  for (const auto& entry : waiting_) entry->job->cancel();
  waiting_.clear();
  for (const auto& [id, entry] : by_id_) entry->job->cancel();
  idle_.wait(lock, [this] { return running_ == 0; });
}

}  // namespace bentlight::query
