#include "base/file.h"

#include <fcntl.h>
#include <fmt/format.h>
#include <sys/stat.h>
#include <unistd.h>

#include <cerrno>
#include <cstdio>

namespace bentlight {

namespace {

class Descriptor {
 public:
  explicit Descriptor(int value) : value_(value) {}
  ~Descriptor() {
    if (value_ >= 0) ::close(value_);
  }
  Descriptor(Descriptor&& other) noexcept : value_(std::exchange(other.value_, -1)) {}
  Descriptor(const Descriptor&) = delete;
  Descriptor& operator=(const Descriptor&) = delete;
  int value() const { return value_; }
  /// Closes and tells whether the system had kept back a write error until now.
  bool close() { return ::close(std::exchange(value_, -1)) == 0; }

 private:
  int value_;
};

FileStamp stamp_of(const struct stat& status) {
  return {.size_bytes = static_cast<std::uint64_t>(status.st_size),
          .mtime_ns = status.st_mtim.tv_sec * std::int64_t{1'000'000'000} + status.st_mtim.tv_nsec,
          .inode = status.st_ino};
}

class PosixReadFile final : public ReadFile {
 public:
  PosixReadFile(Descriptor descriptor, std::string path)
      : descriptor_(std::move(descriptor)), path_(std::move(path)) {}

  Expected<void> read_at(std::uint64_t offset, std::span<std::byte> out) const override {
    while (!out.empty()) {
      const ssize_t got = ::pread(descriptor_.value(), out.data(), out.size(), static_cast<off_t>(offset));
      if (got < 0 && errno == EINTR) continue;
      if (got < 0) return system_failure(errno, "reading", path_);
      if (got == 0) {
        return failure(
            ErrorCode::file_changed,
            fmt::format("the file ends at byte {}, {} bytes short of what was indexed", offset, out.size()),
            path_);
      }
      out = out.subspan(static_cast<std::size_t>(got));
      offset += static_cast<std::uint64_t>(got);
    }
    return {};
  }

  Expected<FileStamp> stamp() const override {
    struct stat status {};
    if (::fstat(descriptor_.value(), &status) != 0) return system_failure(errno, "looking at", path_);
    return stamp_of(status);
  }

  int descriptor() const override { return descriptor_.value(); }

 private:
  Descriptor descriptor_;
  std::string path_;
};

class PosixNewFile final : public NewFile {
 public:
  static Expected<std::unique_ptr<PosixNewFile>> make(const std::filesystem::path& path, int flags) {
    Descriptor file(::open(path.c_str(), O_WRONLY | O_CREAT | O_CLOEXEC | flags, 0640));
    if (file.value() < 0) return system_failure(errno, "creating", path.string());
    return std::unique_ptr<PosixNewFile>(new PosixNewFile(std::move(file), path.string()));
  }

  Expected<void> append(std::span<const std::byte> bytes) override {
    while (!bytes.empty()) {
      const ssize_t put = ::write(descriptor_.value(), bytes.data(), bytes.size());
      if (put < 0 && errno == EINTR) continue;
      if (put < 0) return system_failure(errno, "writing", path_);
      bytes = bytes.subspan(static_cast<std::size_t>(put));
    }
    return {};
  }

  Expected<void> finish() override {
    if (::fsync(descriptor_.value()) != 0) return system_failure(errno, "syncing", path_);
    if (!descriptor_.close()) return system_failure(errno, "closing", path_);
    return {};
  }

 private:
  PosixNewFile(Descriptor descriptor, std::string path)
      : descriptor_(std::move(descriptor)), path_(std::move(path)) {}

  Descriptor descriptor_;
  const std::string path_;
};

Expected<void> write_and_sync(const std::filesystem::path& path,
                              int flags,
                              std::span<const std::byte> bytes) {
  const auto file = PosixNewFile::make(path, flags);
  if (!file) return failure(file);
  if (auto written = (*file)->append(bytes); !written) return written;
  return (*file)->finish();
}

Expected<void> sync_folder(const std::filesystem::path& path) {
  const Descriptor folder(::open(path.c_str(), O_RDONLY | O_DIRECTORY | O_CLOEXEC));
  if (folder.value() < 0) return system_failure(errno, "opening the folder", path.string());
  if (::fsync(folder.value()) != 0) return system_failure(errno, "syncing the folder", path.string());
  return {};
}

}  // namespace

Expected<std::unique_ptr<ReadFile>> PosixFileSystem::open(const std::filesystem::path& path) const {
  // Not blocking, so that a pipe put among the files cannot hold a thread for ever.
  Descriptor descriptor(::open(path.c_str(), O_RDONLY | O_CLOEXEC | O_NONBLOCK));
  if (descriptor.value() < 0) return system_failure(errno, "opening", path.string());
  struct stat status {};
  if (::fstat(descriptor.value(), &status) != 0) return system_failure(errno, "looking at", path.string());
  if (!S_ISREG(status.st_mode)) return failure(ErrorCode::unsafe_file, "not a regular file", path.string());
  return std::make_unique<PosixReadFile>(std::move(descriptor), path.string());
}

Expected<FileStamp> PosixFileSystem::stamp(const std::filesystem::path& path) const {
  struct stat status {};
  if (::stat(path.c_str(), &status) != 0) return system_failure(errno, "looking at", path.string());
  return stamp_of(status);
}

Expected<void> PosixFileSystem::replace(const std::filesystem::path& path,
                                        std::span<const std::byte> bytes) const {
  // The thread's number, which no other thread of the machine has, keeps two writers from sharing one file
  // aside; the last rename wins, whole.
  const auto aside = std::filesystem::path(path).concat(fmt::format(".{}.aside", ::gettid()));
  if (auto written = write_and_sync(aside, O_TRUNC, bytes); !written) {
    ::unlink(aside.c_str());
    return written;
  }
  if (std::rename(aside.c_str(), path.c_str()) != 0) {
    const int error_number = errno;
    ::unlink(aside.c_str());
    return system_failure(error_number, "renaming", path.string());
  }
  return sync_folder(path.parent_path());
}

Expected<void> PosixFileSystem::create(const std::filesystem::path& path,
                                       std::span<const std::byte> bytes) const {
  return write_and_sync(path, O_EXCL, bytes);
}

Expected<std::unique_ptr<NewFile>> PosixFileSystem::start(const std::filesystem::path& path) const {
  return PosixNewFile::make(path, O_EXCL);
}

Expected<void> PosixFileSystem::publish_folder(const std::filesystem::path& from,
                                               const std::filesystem::path& to) const {
  if (auto synced = sync_folder(from); !synced) return synced;
  if (std::rename(from.c_str(), to.c_str()) != 0) return system_failure(errno, "renaming", from.string());
  if (auto synced = sync_folder(from.parent_path()); !synced) return synced;
  return sync_folder(to.parent_path());
}

Expected<std::string> read_whole(const FileSystem& files,
                                 const std::filesystem::path& path,
                                 std::size_t limit_bytes) {
  const auto file = files.open(path);
  if (!file) return failure(file);
  const auto stamp = (*file)->stamp();
  if (!stamp) return failure(stamp);
  if (stamp->size_bytes > limit_bytes) {
    return failure(ErrorCode::too_large,
                   fmt::format("{} bytes; at most {} are read", stamp->size_bytes, limit_bytes),
                   path.string());
  }
  std::string text(stamp->size_bytes, '\0');
  if (auto read = (*file)->read_at(0, std::as_writable_bytes(std::span(text))); !read) return failure(read);
  return text;
}

}  // namespace bentlight
