// Writing HDF5: the demo archive's wavefront files, and results for those who asked for HDF5.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <memory>
#include <optional>
#include <span>
#include <string>
#include <variant>
#include <vector>

#include "base/error.h"

namespace bentlight::archive {

using AttributeValue = std::variant<double, std::int64_t, std::string>;

/// How a dataset of a new file is kept.
struct DatasetStorage {
  std::vector<std::uint64_t> chunk;  // empty: contiguous
  int deflate_level = 0;             // 0: none
  bool shuffle = false;
  bool fletcher32 = false;
};

/// One new HDF5 file. Equal calls give equal bytes: no times of day are stored.
///
///   throws   std::invalid_argument when data and shape differ, or the order begin, append, close is broken
///   errors   of every call: disk_full, permission_denied, io_error; the file is worthless then
///   threads  one writer belongs to one thread at a time; writers in several threads share the library's
///   global lock,
///            which is taken inside
class Hdf5Writer {
 public:
  /// A file at `path`, which is replaced.
  static Expected<Hdf5Writer> create(const std::filesystem::path& path);
  /// A file in memory, for image().
  static Expected<Hdf5Writer> in_memory();
  Hdf5Writer(Hdf5Writer&&) noexcept;
  ~Hdf5Writer();

  /// Text is kept in UTF-8 with variable length, numbers as 64 bits. `object` is "/" or the path of a dataset
  /// or group that exists.
  Expected<void> attribute(const std::string& object, const std::string& name, const AttributeValue& value);

  /// A whole dataset at once, contiguous; groups on its path are made. An empty shape makes a scalar. Element
  /// types: double, float, std::uint8_t, std::int64_t.
  template <class Element>
  Expected<void> dataset(const std::string& path,
                         std::span<const std::uint64_t> shape,
                         std::span<const Element> data);

  /// A dataset that append() fills along its first axis, in rising order. What is never appended has no
  /// defined value.
  template <class Element>
  Expected<void> begin(const std::string& path,
                       std::span<const std::uint64_t> shape,
                       const DatasetStorage& storage);

  ///   cost     pieces that begin and end at chunk borders (or at the end) are filtered outside the lock;
  ///   others, and
  ///            those with fletcher32, pass through the library, several times slower
  template <class Element>
  Expected<void> append(const std::string& path,
                        std::uint64_t first,
                        std::uint64_t count,
                        std::span<const Element> data);

  /// Names `axes` [one dataset path per dimension, empty for none] as dimension scales of `path`; once per
  /// dataset.
  ///
  ///   source   HDF5 dimension scale specification, attributes CLASS, NAME, REFERENCE_LIST and DIMENSION_LIST
  Expected<void> axes(const std::string& path, std::span<const std::string> axes);

  /// Closes; the file is complete after this and only then.
  Expected<void> close();
  /// Closes a file in memory and gives its bytes.
  Expected<std::vector<std::byte>> image();

 private:
  struct State;
  explicit Hdf5Writer(std::unique_ptr<State> state);
  std::unique_ptr<State> state_;
};

}  // namespace bentlight::archive
