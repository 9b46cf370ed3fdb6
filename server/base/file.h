// Files: positioned reads, and writes that either happened or did not.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <memory>
#include <span>
#include <string>
#include <string_view>

#include "base/error.h"

namespace bentlight {

/// What tells one state of a file from another without reading it.
struct FileStamp {
  std::uint64_t size_bytes = 0;
  std::int64_t mtime_ns = 0;
  std::uint64_t inode = 0;
  bool operator==(const FileStamp&) const = default;
};

/// A file opened for reading.
///
///   threads  read_at is safe from any thread
class ReadFile {
 public:
  virtual ~ReadFile() = default;

  /// Fills `out` from `offset`. A file that ends before that is an error, never a short answer.
  ///
  ///   errors  io_error, file_changed when the file ends too early
  virtual Expected<void> read_at(std::uint64_t offset, std::span<std::byte> out) const = 0;
  virtual Expected<FileStamp> stamp() const = 0;
  /// The descriptor, for handing to the probe; owned by this object.
  virtual int descriptor() const = 0;
};

/// A new file that is filled bit by bit, in a folder that is not visible yet.
///
///   threads  one at a time
class NewFile {
 public:
  virtual ~NewFile() = default;

  /// errors  disk_full, io_error
  virtual Expected<void> append(std::span<const std::byte> bytes) = 0;
  /// Syncs and closes the file; without this nothing is promised about it.
  virtual Expected<void> finish() = 0;
};

/// The way to the disk, passed in so that a test can cut a read short or fill the disk.
///
///   threads  safe from any thread
class FileSystem {
 public:
  virtual ~FileSystem() = default;

  /// errors  file_missing, permission_denied, io_error
  virtual Expected<std::unique_ptr<ReadFile>> open(const std::filesystem::path& path) const = 0;
  virtual Expected<FileStamp> stamp(const std::filesystem::path& path) const = 0;

  /// Makes `path` hold exactly `bytes`: written aside, synced, renamed, folder synced. After a crash the file
  /// is the old one or the new one.
  ///
  ///   errors  disk_full, permission_denied, io_error; the old file is untouched then
  virtual Expected<void> replace(const std::filesystem::path& path,
                                 std::span<const std::byte> bytes) const = 0;

  /// Creates `path` with `bytes` and syncs it; for files in a folder that is not visible yet.
  virtual Expected<void> create(const std::filesystem::path& path,
                                std::span<const std::byte> bytes) const = 0;

  /// The same for a file that is too long to be held at once.
  virtual Expected<std::unique_ptr<NewFile>> start(const std::filesystem::path& path) const = 0;

  /// Gives the folder `from` its final name `to` (which must not exist) and syncs both parents.
  virtual Expected<void> publish_folder(const std::filesystem::path& from,
                                        const std::filesystem::path& to) const = 0;
};

/// The operating system's files.
class PosixFileSystem final : public FileSystem {
 public:
  Expected<std::unique_ptr<ReadFile>> open(const std::filesystem::path& path) const override;
  Expected<FileStamp> stamp(const std::filesystem::path& path) const override;
  Expected<void> replace(const std::filesystem::path& path, std::span<const std::byte> bytes) const override;
  Expected<void> create(const std::filesystem::path& path, std::span<const std::byte> bytes) const override;
  Expected<std::unique_ptr<NewFile>> start(const std::filesystem::path& path) const override;
  Expected<void> publish_folder(const std::filesystem::path& from,
                                const std::filesystem::path& to) const override;
};

/// The whole of a small file. errors  as open; too_large beyond `limit_bytes`
Expected<std::string> read_whole(const FileSystem& files,
                                 const std::filesystem::path& path,
                                 std::size_t limit_bytes);

inline std::span<const std::byte> as_bytes(std::string_view text) {
  return {reinterpret_cast<const std::byte*>(text.data()), text.size()};
}

}  // namespace bentlight
