// The static page: files of two folders, with the policy that keeps scripts from elsewhere out.
#pragma once

#include <filesystem>
#include <string>

#include "base/error.h"
#include "base/file.h"
#include "http/reply.h"

namespace bentlight::http {

/// threads  safe from any thread
class StaticPage {
 public:
  StaticPage(const FileSystem& files, std::filesystem::path page, std::filesystem::path vendor)
      : files_(files), page_(std::move(page)), vendor_(std::move(vendor)) {}

  /// The file for a request's path; "/" is index.html.
  ///
  ///   errors  unknown_route for what is not a file of the page, or of no known type
  Expected<Reply> find(const std::string& path) const;

 private:
  const FileSystem& files_;
  const std::filesystem::path page_, vendor_;
};

}  // namespace bentlight::http
