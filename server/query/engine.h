// The way of a question: recipe, plan, job, result.
#pragma once

#include <chrono>
#include <memory>
#include <string>
#include <variant>

#include "base/error.h"
#include "base/log.h"
#include "base/work_pool.h"
#include "index/index.h"
#include "query/catalogue.h"
#include "query/jobs.h"
#include "query/open_view.h"
#include "query/recipe.h"
#include "query/recipe_book.h"
#include "query/result.h"
#include "query/result_cache.h"

namespace bentlight::query {

/// A result, or the job that will have it.
struct Answer {
  std::shared_ptr<const Result> result;  // null while the job goes on
  std::shared_ptr<Job> job;              // null when the result was at hand
  std::string digest;
};

/// What an engine works with; all owned by main and outliving it.
struct EngineParts {
  const FileSystem& files;
  const index::Index& index;
  const Catalogue& catalogue;
  ViewShelf& shelf;
  ResultCache& cache;
  const RecipeBook& book;
  Jobs& jobs;
  Log& log;
};

/// threads  safe from any thread
class Engine {
 public:
  explicit Engine(EngineParts parts);

  const Catalogue& catalogue() const { return parts_.catalogue; }

  /// errors  unknown_view, unknown_run, unknown_analysis, those of the recipe
  Expected<Recipe> view_recipe(const std::string& view, const std::string& analysis, const RawParameters& given) const;
  Expected<Recipe> run_recipe(const std::string& run, const std::string& analysis, const RawParameters& given) const;

  /// The question that a digest stands for, if its inputs are still those of then.
  ///
  ///   errors  unknown_result; file_changed when an input is no longer what it was
  Expected<Recipe> recipe_of(const std::string& digest) const;

  /// What answering would cost. errors  those of the analysis's plan
  Expected<Plan> plan(const Recipe& recipe) const;

  /// Answers from the cache, or by a job. A question within the interactive budget is waited for; a long one is
  /// waited for only as long as `patience` says.
  ///
  ///   errors  whatever the computation met; overloaded, memory_budget, shutting_down
  Expected<Answer> answer(const Recipe& recipe, std::chrono::milliseconds patience);

 private:
  Expected<std::shared_ptr<const Result>> compute(const Recipe& recipe, WorkPool& pool, const std::stop_token& stop,
                                                  Progress& progress);
  std::shared_ptr<const Result> finished(const Recipe& recipe, const Plan& plan, Result result) const;
  Expected<std::shared_ptr<const Result>> ask(const std::string& view, const std::string& analysis,
                                              const RawParameters& parameters, WorkPool& pool,
                                              const std::stop_token& stop);

  EngineParts parts_;
  Ask ask_;
};

}  // namespace bentlight::query
