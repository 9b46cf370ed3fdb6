// Objects of an HDF5 file, looked at with suspicion: everything that leads out of the file is refused by
// name.
#pragma once

#include <hdf5.h>

#include <cstdint>
#include <optional>
#include <string>
#include <variant>
#include <vector>

#include "base/error.h"
#include "probe/fd_driver.h"
#include "probe/handle.h"

namespace bentlight::probe {

/// One open file of the library and what is behind it.
struct OpenedFile {
  FdFile& source;
  Handle handle;
  hid_t id() const { return handle.id(); }
};

/// errors  not_hdf5, damaged_file, file_changed when another program has it open for writing
Expected<OpenedFile> open_hdf5(FdFile& source);

/// The error for a call of the library that failed on `subject`: unsafe_file when it had tried to leave the
/// file, damaged_file otherwise.
tl::unexpected<Error> library_failure(const FdFile& source, const std::string& what);

/// Whether a path leads to something. Absent is not an error; a link that leads out of the file is.
///
///   errors  unsafe_file (external and user-defined links), damaged_file
Expected<bool> exists(const OpenedFile& file, const std::string& path);

/// The dataset at `path`, or nothing when there is no such object.
///
///   errors  unsafe_file (also: external storage, virtual datasets), layout_mismatch when it is no dataset
Expected<std::optional<Handle>> find_dataset(const OpenedFile& file, const std::string& path);

/// errors  damaged_file
Expected<std::vector<std::uint64_t>> shape_of(const FdFile& source, hid_t dataset, const std::string& path);

/// "64 x 128 x 128"; "a single value" without dimensions.
std::string shape_text(const std::vector<std::uint64_t>& shape);

/// A type for a person, such as "float32, big-endian" or "a compound type".
std::string type_text(hid_t type);

/// "deflate", "szip", "filter 32015 (zstd)" …
std::string filter_text(hid_t creation, unsigned filter);

using Text = std::string;
using AttributeContent = std::variant<double, Text>;

/// The attribute `name` of an object, when it has one: a number of any kind, a string of any kind, or an
/// array of one.
///
///   errors  layout_mismatch when it is something else; damaged_file
Expected<std::optional<AttributeContent>> attribute(const FdFile& source,
                                                    hid_t object,
                                                    const std::string& name);

/// A whole dataset of numbers, converted by the library.
///
///   errors  layout_mismatch when its elements are no numbers, damaged_file
template <class Element>
Expected<std::vector<Element>> numbers(const FdFile& source,
                                       hid_t dataset,
                                       const std::string& path,
                                       std::uint64_t count);

}  // namespace bentlight::probe
