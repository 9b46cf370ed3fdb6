// Remembers which question a digest stands for, so that a permalink can be answered after its result left the cache.
#pragma once

#include <filesystem>
#include <string>

#include "base/error.h"
#include "base/file.h"
#include "query/parameter.h"
#include "query/recipe.h"

namespace bentlight::query {

/// A question as it can be asked again.
struct AskedQuestion {
  std::string analysis;
  std::string subject;
  bool is_about_run = false;
  RawParameters parameters;
};

/// One small file per digest in `folder`.
///
///   threads  safe from any thread
class RecipeBook {
 public:
  RecipeBook(const FileSystem& files, std::filesystem::path folder) : files_(files), folder_(std::move(folder)) {}

  /// errors  disk_full, permission_denied, io_error
  Expected<void> keep(const Recipe& recipe) const;

  /// errors  unknown_result
  Expected<AskedQuestion> find(const std::string& digest) const;

 private:
  std::filesystem::path place_of(const std::string& digest) const;

  const FileSystem& files_;
  const std::filesystem::path folder_;
};

}  // namespace bentlight::query
