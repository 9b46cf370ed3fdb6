// A folder of state files that is either whole or not there. A manifest holds a checksum for every piece of
// every file: a torn or altered piece is found when it is read, and what is not read costs nothing.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <map>
#include <memory>
#include <span>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/file.h"

namespace bentlight {

inline constexpr std::size_t sealed_piece_bytes = 256 * 1024;

/// Fills a folder that nobody sees yet. FileSystem::publish_folder gives it its name once it is sealed.
class SealedFolderWriter {
 public:
  SealedFolderWriter(const FileSystem& files, std::filesystem::path folder)
      : files_(files), folder_(std::move(folder)) {}

  /// errors  as FileSystem::create
  Expected<void> add(const std::string& name, std::span<const std::byte> bytes) const {
    return files_.create(folder_ / name, bytes);
  }

  /// Writes the manifest over all files that lie in the folder, whoever put them there.
  ///
  ///   errors  io_error, disk_full
  ///   throws  std::invalid_argument for a file whose name holds a blank
  Expected<void> seal() const;

 private:
  const FileSystem& files_;
  const std::filesystem::path folder_;
};

/// Reads a sealed folder. Files are opened once and stay open, so that a folder that is replaced meanwhile
/// stays readable for those who have it.
///
///   threads  safe from any thread
class SealedFolder {
 public:
  /// errors  damaged_state: no manifest, or one that cannot be understood, or a file missing or of another
  /// size;
  ///         newer_state: sealed by a program of a later version
  static Expected<std::shared_ptr<const SealedFolder>> open(const FileSystem& files,
                                                            const std::filesystem::path& folder);

  bool has(const std::string& name) const { return files_.contains(name); }

  /// errors  damaged_state: no such file
  Expected<std::uint64_t> size(const std::string& name) const;

  /// Fills `out` from `offset`; every piece touched is verified.
  ///
  ///   errors  damaged_state: a piece is not what was sealed, or the range leaves the file; io_error
  Expected<void> read(const std::string& name, std::uint64_t offset, std::span<std::byte> out) const;

  Expected<std::vector<std::byte>> read_all(const std::string& name) const;

 private:
  struct File {
    std::unique_ptr<ReadFile> file;
    std::uint64_t bytes = 0;
    std::vector<std::uint64_t> pieces;  // checksums
  };
  explicit SealedFolder(std::filesystem::path folder) : folder_(std::move(folder)) {}
  tl::unexpected<Error> damaged(const std::string& name, std::string_view why) const;
  Expected<std::vector<std::string>> manifest_lines(const FileSystem& files) const;

  const std::filesystem::path folder_;
  std::map<std::string, File> files_;
};

}  // namespace bentlight
