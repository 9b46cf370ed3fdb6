// The operating system's files, counted, and failing when a test wants them to.
#pragma once

#include <signal.h>
#include <unistd.h>

#include <atomic>
#include <cstdint>
#include <filesystem>
#include <functional>
#include <limits>
#include <memory>
#include <string>

#include "base/file.h"

namespace bentlight::test {

/// What was asked of the files, and what shall become of the next writes.
struct FileCounts {
  std::atomic<std::uint64_t> opened{0}, stamped{0}, bytes_read{0};
  std::atomic<std::int64_t> room{std::numeric_limits<std::int64_t>::max()};  // bytes until the disk is full
  std::atomic<std::int64_t> writes_left{
      std::numeric_limits<std::int64_t>::max()};  // until the process is killed
  std::function<void(const std::filesystem::path&)> before_read;
};

class FaultyFiles final : public FileSystem {
 public:
  explicit FaultyFiles(FileCounts& counts) : counts_(counts) {}

  Expected<std::unique_ptr<ReadFile>> open(const std::filesystem::path& path) const override {
    ++counts_.opened;
    auto file = posix_.open(path);
    if (!file) return file;
    return std::make_unique<CountedFile>(std::move(*file), counts_, path);
  }
  Expected<FileStamp> stamp(const std::filesystem::path& path) const override {
    ++counts_.stamped;
    return posix_.stamp(path);
  }
  Expected<void> replace(const std::filesystem::path& path, std::span<const std::byte> bytes) const override {
    if (auto fits = take(bytes.size(), path); !fits) return fits;
    return posix_.replace(path, bytes);
  }
  Expected<void> create(const std::filesystem::path& path, std::span<const std::byte> bytes) const override {
    if (auto fits = take(bytes.size(), path); !fits) return fits;
    return posix_.create(path, bytes);
  }
  Expected<std::unique_ptr<NewFile>> start(const std::filesystem::path& path) const override {
    auto file = posix_.start(path);
    if (!file) return file;
    return std::make_unique<BoundedFile>(std::move(*file), *this, path);
  }
  Expected<void> publish_folder(const std::filesystem::path& from,
                                const std::filesystem::path& to) const override {
    if (auto fits = take(0, to); !fits) return fits;
    return posix_.publish_folder(from, to);
  }

 private:
  class CountedFile final : public ReadFile {
   public:
    CountedFile(std::unique_ptr<ReadFile> file, FileCounts& counts, std::filesystem::path path)
        : file_(std::move(file)), counts_(counts), path_(std::move(path)) {}
    Expected<void> read_at(std::uint64_t offset, std::span<std::byte> out) const override {
      counts_.bytes_read += out.size();
      if (counts_.before_read) counts_.before_read(path_);
      return file_->read_at(offset, out);
    }
    Expected<FileStamp> stamp() const override { return file_->stamp(); }
    int descriptor() const override { return file_->descriptor(); }

   private:
    std::unique_ptr<ReadFile> file_;
    FileCounts& counts_;
    std::filesystem::path path_;
  };

  class BoundedFile final : public NewFile {
   public:
    BoundedFile(std::unique_ptr<NewFile> file, const FaultyFiles& files, std::filesystem::path path)
        : file_(std::move(file)), files_(files), path_(std::move(path)) {}
    Expected<void> append(std::span<const std::byte> bytes) override {
      if (auto fits = files_.take(bytes.size(), path_); !fits) return fits;
      return file_->append(bytes);
    }
    Expected<void> finish() override {
      if (auto fits = files_.take(0, path_); !fits) return fits;
      return file_->finish();
    }

   private:
    std::unique_ptr<NewFile> file_;
    const FaultyFiles& files_;
    std::filesystem::path path_;
  };

  Expected<void> take(std::size_t bytes, const std::filesystem::path& path) const {
    if (counts_.writes_left.fetch_sub(1) <= 0) ::kill(::getpid(), SIGKILL);
    const auto wanted = static_cast<std::int64_t>(bytes);
    if (counts_.room.fetch_sub(wanted) >= wanted) return {};
    return failure(ErrorCode::disk_full, "writing: No space left on device", path.string());
  }

  PosixFileSystem posix_;
  FileCounts& counts_;
};

}  // namespace bentlight::test
