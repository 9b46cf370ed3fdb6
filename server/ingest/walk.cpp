#include "ingest/walk.h"

#include <algorithm>
#include <array>
#include <string>

namespace bentlight::ingest {

namespace fs = std::filesystem;

namespace {

bool may_be_wavefront_file(const fs::path& path) {
  constexpr std::array<std::string_view, 5> endings = {".h5", ".hdf5", ".he5", ".nc", ".mat"};
  return std::ranges::find(endings, path.extension().string()) != endings.end();
}

/// True when `path`, links resolved, lies inside `root`.
bool stays_inside(const fs::path& path, const fs::path& root) {
  std::error_code error;
  const fs::path real = fs::canonical(path, error);
  if (error) return false;
  return std::mismatch(root.begin(), root.end(), real.begin(), real.end()).first == root.end();
}

class Walker {
 public:
  Walker(const FileSystem& files, fs::path root) : files_(files), root_(std::move(root)) {}

  void enter(const fs::path& folder) {
    std::error_code error;
    fs::directory_iterator entries(folder, error);
    if (error) {
      report(system_failure(error.value(), "opening the folder", relative(folder)).value());
      return;
    }
    for (; entries != fs::directory_iterator(); entries.increment(error)) {
      if (error) break;
      look_at(*entries);
    }
    if (error) report(system_failure(error.value(), "reading the folder", relative(folder)).value());
  }

  Walk finish() {
    std::ranges::sort(walk_.files, {}, &FoundFile::path);
    std::ranges::sort(walk_.unreadable, {}, &Error::subject);
    return std::move(walk_);
  }

 private:
  void look_at(const fs::directory_entry& entry) {
    if (entry.path().filename().string().starts_with(".")) return;
    std::error_code error;
    if (entry.is_symlink(error) && !stays_inside(entry.path(), root_)) return;
    if (entry.is_directory(error)) {
      // A link to a folder inside would be walked twice, and a loop for ever: its target is found anyway.
      if (!entry.is_symlink(error)) enter(entry.path());
      return;
    }
    if (!may_be_wavefront_file(entry.path()) || !entry.is_regular_file(error)) return;
    const auto stamp = files_.stamp(entry.path());
    if (stamp) {
      walk_.files.push_back({relative(entry.path()), *stamp});
    } else {
      report({stamp.error().code, stamp.error().text, relative(entry.path())});
    }
  }

  std::string relative(const fs::path& path) const { return path.lexically_relative(root_).string(); }
  void report(Error error) { walk_.unreadable.push_back(std::move(error)); }

  const FileSystem& files_;
  const fs::path root_;
  Walk walk_;
};

}  // namespace

Expected<Walk> walk_archive(const FileSystem& files, const fs::path& archive) {
  std::error_code error;
  const fs::path root = fs::canonical(archive, error);
  if (error) return system_failure(error.value(), "opening the archive", archive.string());
  if (fs::directory_iterator(root, error); error) {
    return system_failure(error.value(), "opening the archive", archive.string());
  }
  Walker walker(files, root);
  walker.enter(root);
  return walker.finish();
}

}  // namespace bentlight::ingest
