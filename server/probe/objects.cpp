#include "probe/objects.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdlib>
#include <cstring>
#include <string_view>
#include <utility>

#include "base/limits.h"
#include "probe/hdf5_error.h"

namespace bentlight::probe {

namespace {

/// The signature stands at 0 or at a power of two from 512 on: HDF5 File Format Specification, III.A.
bool has_signature(const FdFile& source) {
  constexpr std::string_view signature("\x89HDF\r\n\x1a\n", 8);
  std::array<char, 8> bytes{};
  for (std::uint64_t at = 0; at + bytes.size() <= source.bytes(); at = at == 0 ? 512 : at * 2) {
    if (source.read(at, bytes.data(), bytes.size()) &&
        std::string_view(bytes.data(), bytes.size()) == signature) {
      return true;
    }
  }
  return false;
}

/// What kind of link the last name of `path` is; the names before it have been looked at.
Expected<void> verify_link(const OpenedFile& file, const std::string& path) {
  H5L_info_t info{};
  if (H5Lget_info(file.id(), path.c_str(), &info, H5P_DEFAULT) < 0) {
    return library_failure(file.source, fmt::format("looking at '{}'", path));
  }
  if (info.type == H5L_TYPE_EXTERNAL) {
    return failure(ErrorCode::unsafe_file,
                   fmt::format("'{}' is an external link: it leads into another file", path));
  }
  if (info.type != H5L_TYPE_HARD && info.type != H5L_TYPE_SOFT) {
    return failure(ErrorCode::unsafe_file, fmt::format("'{}' is a user-defined link", path));
  }
  return {};
}

Expected<void> verify_storage_inside(hid_t dataset, const std::string& path) {
  const Handle creation(H5Dget_create_plist(dataset), H5Pclose);
  if (!creation)
    return failure(ErrorCode::damaged_file, with_library_fault(fmt::format("looking at '{}'", path)));
  if (H5Pget_external_count(creation.id()) > 0) {
    return failure(ErrorCode::unsafe_file, fmt::format("'{}' keeps its data in an external file", path));
  }
  if (H5Pget_layout(creation.id()) == H5D_VIRTUAL) {
    return failure(ErrorCode::unsafe_file,
                   fmt::format("'{}' is a virtual dataset: its data lies in other files", path));
  }
  return {};
}

std::string float_text(hid_t type) {
  for (const auto& [known, text] :
       {std::pair{H5T_IEEE_F32LE, "float32"}, std::pair{H5T_IEEE_F32BE, "float32, big-endian"},
        std::pair{H5T_IEEE_F64LE, "float64"}, std::pair{H5T_IEEE_F64BE, "float64, big-endian"}}) {
    if (H5Tequal(type, known) > 0) return text;
  }
  return fmt::format("a float of {} bytes", H5Tget_size(type));
}

/// Text of fixed length, without what it was padded with.
std::string trimmed(std::string text) {
  if (const auto end = text.find('\0'); end != std::string::npos) text.resize(end);
  while (!text.empty() && text.back() == ' ') text.pop_back();
  return text;
}

Expected<AttributeContent> read_text(const FdFile& source,
                                     hid_t attribute,
                                     hid_t type,
                                     const std::string& name) {
  const Handle memory(H5Tcopy(H5T_C_S1), H5Tclose);
  H5Tset_cset(memory.id(), H5Tget_cset(type));
  std::string text;
  if (H5Tis_variable_str(type) > 0) {
    H5Tset_size(memory.id(), H5T_VARIABLE);
    char* value = nullptr;
    if (H5Aread(attribute, memory.id(), &value) < 0) {
      return library_failure(source, fmt::format("reading the attribute '{}'", name));
    }
    if (value != nullptr) text.assign(value, ::strnlen(value, limits::attribute_text_bytes + 1));
    H5free_memory(value);
  } else {
    const std::size_t bytes = H5Tget_size(type);
    if (bytes <= limits::attribute_text_bytes) {
      H5Tset_size(memory.id(), bytes);
      H5Tset_strpad(memory.id(), H5Tget_strpad(type));
      text.resize(bytes);
      if (H5Aread(attribute, memory.id(), text.data()) < 0) {
        return library_failure(source, fmt::format("reading the attribute '{}'", name));
      }
    } else {
      text.resize(limits::attribute_text_bytes + 1);
    }
  }
  if (text.size() > limits::attribute_text_bytes) {
    return failure(ErrorCode::too_large, fmt::format("the attribute '{}' has more than {} bytes of text",
                                                     name, limits::attribute_text_bytes));
  }
  return trimmed(std::move(text));
}

template <class Element>
hid_t memory_type();
template <>
hid_t memory_type<double>() {
  return H5T_NATIVE_DOUBLE;
}
template <>
hid_t memory_type<float>() {
  return H5T_NATIVE_FLOAT;
}
template <>
hid_t memory_type<std::int64_t>() {
  return H5T_NATIVE_INT64;
}

bool is_number(hid_t type) {
  const H5T_class_t kind = H5Tget_class(type);
  return kind == H5T_INTEGER || kind == H5T_FLOAT ||
         kind == H5T_ENUM;  // an enumeration is how h5py writes bool
}

}  // namespace

tl::unexpected<Error> library_failure(const FdFile& source, const std::string& what) {
  if (source.refused_name()) {
    H5Eclear2(H5E_DEFAULT);
    return failure(ErrorCode::unsafe_file,
                   fmt::format("{}: a link leads into another file, '{}'", what, *source.refused_name()));
  }
  return failure(ErrorCode::damaged_file, with_library_fault(what));
}

Expected<OpenedFile> open_hdf5(FdFile& source) {
  if (source.bytes() == 0) return failure(ErrorCode::not_hdf5, "the file is empty");
  if (!has_signature(source))
    return failure(ErrorCode::not_hdf5, "the file is no HDF5 file: it lacks the signature");
  const Handle access = source.access();
  // A file that a writer has announced for concurrent reading can be opened only as that reader.
  for (const unsigned flags : {H5F_ACC_RDONLY, H5F_ACC_RDONLY | H5F_ACC_SWMR_READ}) {
    Handle handle(H5Fopen(FdFile::name, flags, access.id()), H5Fclose);
    if (handle) {
      H5Eclear2(H5E_DEFAULT);
      return OpenedFile{source, std::move(handle)};
    }
    if (flags == H5F_ACC_RDONLY) {
      const std::string fault = library_fault();
      if (fault.find("already open for") == std::string::npos) {
        return failure(ErrorCode::damaged_file, fault.empty() ? "the file cannot be opened" : fault);
      }
    }
  }
  return failure(ErrorCode::file_changed,
                 with_library_fault("another program has the file open for writing, or died while it had"));
}

Expected<bool> exists(const OpenedFile& file, const std::string& path) {
  if (path.empty() || path == "/") return path == "/";
  // Name by name, since the library finds only the last name absent without an error.
  std::size_t end = 0;
  while (end != std::string::npos) {
    end = path.find('/', end + 1);
    const std::string part = path.substr(0, end);
    if (part.back() == '/') continue;
    const htri_t found = H5Lexists(file.id(), part.c_str(), H5P_DEFAULT);
    if (found < 0) return library_failure(file.source, fmt::format("looking for '{}'", part));
    if (found == 0) return false;
    if (auto verified = verify_link(file, part); !verified) return failure(verified);
    // A soft link may lead nowhere, and then there is nothing.
    const htri_t resolved = H5Oexists_by_name(file.id(), part.c_str(), H5P_DEFAULT);
    if (resolved < 0) return library_failure(file.source, fmt::format("following '{}'", part));
    if (resolved == 0) return false;
  }
  return true;
}

Expected<std::optional<Handle>> find_dataset(const OpenedFile& file, const std::string& path) {
  const auto found = exists(file, path);
  if (!found) return failure(found);
  if (!*found) return std::optional<Handle>();
  const Handle object(H5Oopen(file.id(), path.c_str(), H5P_DEFAULT), H5Oclose);
  if (!object) return library_failure(file.source, fmt::format("opening '{}'", path));
  if (H5Iget_type(object.id()) != H5I_DATASET) {
    return failure(ErrorCode::layout_mismatch, fmt::format("'{}' is a group or a type, not a dataset", path));
  }
  Handle dataset(H5Dopen2(file.id(), path.c_str(), H5P_DEFAULT), H5Dclose);
  if (!dataset) return library_failure(file.source, fmt::format("opening '{}'", path));
  if (auto inside = verify_storage_inside(dataset.id(), path); !inside) return failure(inside);
  return dataset;
}

Expected<std::vector<std::uint64_t>> shape_of(const FdFile& source, hid_t dataset, const std::string& path) {
  const Handle space(H5Dget_space(dataset), H5Sclose);
  const int rank = space ? H5Sget_simple_extent_ndims(space.id()) : -1;
  std::vector<hsize_t> shape(static_cast<std::size_t>(std::max(rank, 0)));
  if (rank < 0 || H5Sget_simple_extent_dims(space.id(), shape.data(), nullptr) < 0) {
    return library_failure(source, fmt::format("reading the shape of '{}'", path));
  }
  return std::vector<std::uint64_t>(shape.begin(), shape.end());
}

std::string shape_text(const std::vector<std::uint64_t>& shape) {
  return shape.empty() ? "a single value" : fmt::format("{}", fmt::join(shape, " x "));
}

std::string type_text(hid_t type) {
  switch (H5Tget_class(type)) {
    case H5T_INTEGER:
      return fmt::format("{}int{}{}", H5Tget_sign(type) == H5T_SGN_NONE ? "u" : "", 8 * H5Tget_size(type),
                         H5Tget_order(type) == H5T_ORDER_BE && H5Tget_size(type) > 1 ? ", big-endian" : "");
    case H5T_FLOAT:
      return float_text(type);
    case H5T_STRING:
      return "text";
    case H5T_COMPOUND:
      return fmt::format("a compound type of {} members", H5Tget_nmembers(type));
    case H5T_ENUM:
      return "an enumeration";
    case H5T_REFERENCE:
      return "references";
    case H5T_ARRAY:
      return "an array type";
    case H5T_VLEN:
      return "lists of varying length";
    default:
      return "an opaque type";
  }
}

std::string filter_text(hid_t creation, unsigned filter) {
  unsigned flags = 0, config = 0;
  std::size_t values = 0;
  std::array<char, 64> name{};
  const H5Z_filter_t id =
      H5Pget_filter2(creation, filter, &flags, &values, nullptr, name.size() - 1, name.data(), &config);
  switch (id) {
    case H5Z_FILTER_DEFLATE:
      return "deflate";
    case H5Z_FILTER_SHUFFLE:
      return "shuffle";
    case H5Z_FILTER_FLETCHER32:
      return "fletcher32";
    case H5Z_FILTER_SZIP:
      return "szip";
    case H5Z_FILTER_NBIT:
      return "nbit";
    case H5Z_FILTER_SCALEOFFSET:
      return "scale-offset";
    default:
      return name[0] == '\0' ? fmt::format("filter {}", id) : fmt::format("filter {} ({})", id, name.data());
  }
}

Expected<std::optional<AttributeContent>> attribute(const FdFile& source,
                                                    hid_t object,
                                                    const std::string& name) {
  const htri_t found = H5Aexists(object, name.c_str());
  if (found < 0) return library_failure(source, fmt::format("looking for the attribute '{}'", name));
  if (found == 0) return std::optional<AttributeContent>();
  const Handle handle(H5Aopen(object, name.c_str(), H5P_DEFAULT), H5Aclose);
  const Handle type(handle ? H5Aget_type(handle.id()) : H5I_INVALID_HID, H5Tclose);
  const Handle space(handle ? H5Aget_space(handle.id()) : H5I_INVALID_HID, H5Sclose);
  if (!type || !space) return library_failure(source, fmt::format("opening the attribute '{}'", name));
  const bool is_text = H5Tget_class(type.id()) == H5T_STRING;
  if (H5Sget_simple_extent_npoints(space.id()) != 1 || (!is_text && !is_number(type.id()))) {
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("the attribute '{}' is {} ({} values), not one number or text", name,
                               type_text(type.id()), H5Sget_simple_extent_npoints(space.id())));
  }
  if (is_text) return read_text(source, handle.id(), type.id(), name);
  double value = 0.0;
  if (H5Aread(handle.id(), H5T_NATIVE_DOUBLE, &value) < 0) {
    return library_failure(source, fmt::format("reading the attribute '{}'", name));
  }
  return value;
}

template <class Element>
Expected<std::vector<Element>> numbers(const FdFile& source,
                                       hid_t dataset,
                                       const std::string& path,
                                       std::uint64_t count) {
  const Handle type(H5Dget_type(dataset), H5Tclose);
  if (!type) return library_failure(source, fmt::format("reading the type of '{}'", path));
  if (!is_number(type.id())) {
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("'{}' holds {}, where numbers are expected", path, type_text(type.id())));
  }
  std::vector<Element> values(static_cast<std::size_t>(count));
  if (H5Dread(dataset, memory_type<Element>(), H5S_ALL, H5S_ALL, H5P_DEFAULT, values.data()) < 0) {
    return library_failure(source, fmt::format("reading '{}'", path));
  }
  return values;
}

template Expected<std::vector<double>> numbers(const FdFile&, hid_t, const std::string&, std::uint64_t);
template Expected<std::vector<float>> numbers(const FdFile&, hid_t, const std::string&, std::uint64_t);
template Expected<std::vector<std::int64_t>> numbers(const FdFile&, hid_t, const std::string&, std::uint64_t);

}  // namespace bentlight::probe
