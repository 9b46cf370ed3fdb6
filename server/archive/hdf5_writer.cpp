#include "archive/hdf5_writer.h"

#include <fmt/format.h>
#include <hdf5.h>
#include <libdeflate.h>
#include <sys/mman.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <atomic>
#include <bit>
#include <cerrno>
#include <cstdlib>
#include <cstring>
#include <map>
#include <mutex>
#include <numeric>
#include <stdexcept>
#include <string_view>
#include <utility>

namespace bentlight::archive {

namespace {

static_assert(std::endian::native == std::endian::little,
              "elements are stored little-endian as they lie in memory");

// The library has global state and, where it was built for threads, a global lock. This one holds for every
// build of it; what costs time (filtering chunks) is done outside.
std::mutex library_mutex;

/// The time during which the library is called: holds its lock, and keeps the library's account of the first
/// failure instead of letting it be printed. It is taken down when it happens, for the next call (even one
/// that releases something on the way out) would clear it.
class LibraryCall {
 public:
  LibraryCall() : lock_(library_mutex) {
    H5Eget_auto2(H5E_DEFAULT, &printer_, &printer_data_);
    H5Eset_auto2(H5E_DEFAULT, take_down, this);
  }
  ~LibraryCall() { H5Eset_auto2(H5E_DEFAULT, printer_, printer_data_); }
  LibraryCall(const LibraryCall&) = delete;
  LibraryCall& operator=(const LibraryCall&) = delete;

  tl::unexpected<Error> failure(std::string_view what, const std::string& subject) const;

 private:
  static herr_t take_down(hid_t stack, void* self) {
    std::string& account = static_cast<LibraryCall*>(self)->account_;
    if (account.empty()) H5Ewalk2(stack, H5E_WALK_UPWARD, add_description, &account);
    return 0;
  }
  static herr_t add_description(unsigned, const H5E_error2_t* entry, void* account) {
    if (entry->desc != nullptr) *static_cast<std::string*>(account) += std::string(entry->desc) + "; ";
    return 0;
  }

  std::lock_guard<std::mutex> lock_;
  H5E_auto2_t printer_ = nullptr;
  void* printer_data_ = nullptr;
  std::string account_;
};

/// The system's errno stands only in the text of the account, as "errno = 28".
tl::unexpected<Error> LibraryCall::failure(std::string_view what, const std::string& subject) const {
  constexpr std::string_view key = "errno = ";
  if (const auto at = account_.find(key); at != std::string::npos) {
    const int number = std::atoi(account_.c_str() + at + key.size());
    if (number != 0) return system_failure(number, what, subject);
  }
  const std::string_view reason = account_.empty() ? "HDF5 gives no reason" : std::string_view(account_);
  return bentlight::failure(ErrorCode::io_error, fmt::format("{}: {}", what, reason), subject);
}

/// An identifier of the library, released at the end of its life. Needs the lock held both times.
class Handle {
 public:
  Handle() = default;
  explicit Handle(hid_t id) : id_(id) {}
  ~Handle() { release(); }
  Handle(Handle&& other) noexcept : id_(std::exchange(other.id_, H5I_INVALID_HID)) {}
  Handle& operator=(Handle&& other) noexcept {
    if (this != &other) {
      release();
      id_ = std::exchange(other.id_, H5I_INVALID_HID);
    }
    return *this;
  }
  hid_t id() const { return id_; }
  bool valid() const { return id_ >= 0; }
  /// Whether the release went well: closing a file writes what the library had kept back.
  bool release() { return id_ < 0 || H5Idec_ref(std::exchange(id_, H5I_INVALID_HID)) >= 0; }

 private:
  hid_t id_ = H5I_INVALID_HID;
};

template <class Element>
hid_t element_type();
template <>
hid_t element_type<float>() {
  return H5T_IEEE_F32LE;
}
template <>
hid_t element_type<double>() {
  return H5T_IEEE_F64LE;
}
template <>
hid_t element_type<std::uint8_t>() {
  return H5T_STD_U8LE;
}
template <>
hid_t element_type<std::int64_t>() {
  return H5T_STD_I64LE;
}

std::uint64_t product(std::span<const std::uint64_t> extents) {
  return std::accumulate(extents.begin(), extents.end(), std::uint64_t{1}, std::multiplies<>());
}

/// Text of any length in UTF-8, the kind that h5py gives back as str.
Handle text_type() {
  Handle type(H5Tcopy(H5T_C_S1));
  H5Tset_size(type.id(), H5T_VARIABLE);
  H5Tset_cset(type.id(), H5T_CSET_UTF8);
  return type;
}

bool write_attribute(hid_t object, const char* name, hid_t type, hid_t space, const void* value) {
  if (H5Aexists(object, name) > 0) H5Adelete(object, name);
  const Handle attribute(H5Acreate2(object, name, type, space, H5P_DEFAULT, H5P_DEFAULT));
  return attribute.valid() && H5Awrite(attribute.id(), type, value) >= 0;
}

bool write_attribute(hid_t object, const char* name, const AttributeValue& value) {
  const Handle scalar(H5Screate(H5S_SCALAR));
  if (const auto* number = std::get_if<double>(&value)) {
    return write_attribute(object, name, H5T_IEEE_F64LE, scalar.id(), number);
  }
  if (const auto* whole = std::get_if<std::int64_t>(&value)) {
    return write_attribute(object, name, H5T_STD_I64LE, scalar.id(), whole);
  }
  const char* text = std::get<std::string>(value).c_str();
  return write_attribute(object, name, text_type().id(), scalar.id(), &text);
}

/// Text of exactly its own length, as the dimension scale specification asks for CLASS and NAME.
bool write_fixed_text(hid_t object, const char* name, const std::string& text) {
  const Handle scalar(H5Screate(H5S_SCALAR));
  const Handle type(H5Tcopy(H5T_C_S1));
  H5Tset_size(type.id(), text.size() + 1);
  return write_attribute(object, name, type.id(), scalar.id(), text.c_str());
}

/// One entry of a scale's REFERENCE_LIST: who uses it, and for which dimension.
struct ScaleUse {
  hobj_ref_t dataset;
  std::int32_t dimension;
};

Handle scale_use_type() {
  Handle type(H5Tcreate(H5T_COMPOUND, sizeof(ScaleUse)));
  H5Tinsert(type.id(), "dataset", offsetof(ScaleUse, dataset), H5T_STD_REF_OBJ);
  H5Tinsert(type.id(), "dimension", offsetof(ScaleUse, dimension), H5T_STD_I32LE);
  return type;
}

bool write_scale_uses(hid_t scale, const std::vector<ScaleUse>& uses) {
  const hsize_t count = uses.size();
  const Handle space(H5Screate_simple(1, &count, nullptr));
  return write_attribute(scale, "REFERENCE_LIST", scale_use_type().id(), space.id(), uses.data());
}

bool write_dimension_list(hid_t dataset, std::vector<std::optional<hobj_ref_t>>& scales) {
  std::vector<hvl_t> lists(scales.size());
  for (std::size_t i = 0; i < scales.size(); ++i) {
    if (scales[i]) lists[i] = {.len = 1, .p = &*scales[i]};
  }
  const hsize_t count = lists.size();
  const Handle space(H5Screate_simple(1, &count, nullptr));
  const Handle type(H5Tvlen_create(H5T_STD_REF_OBJ));
  return write_attribute(dataset, "DIMENSION_LIST", type.id(), space.id(), lists.data());
}

Handle creation_list(const DatasetStorage& storage) {
  Handle list(H5Pcreate(H5P_DATASET_CREATE));
  H5Pset_obj_track_times(list.id(), false);  // the same content gives the same bytes on any day
  if (storage.chunk.empty()) {
    // Every element is going to be written, so the library need not write zeros first.
    H5Pset_alloc_time(list.id(), H5D_ALLOC_TIME_EARLY);
    H5Pset_fill_time(list.id(), H5D_FILL_TIME_NEVER);
    return list;
  }
  H5Pset_chunk(list.id(), static_cast<int>(storage.chunk.size()),
               std::vector<hsize_t>(storage.chunk.begin(), storage.chunk.end()).data());
  if (storage.shuffle) H5Pset_shuffle(list.id());
  if (storage.deflate_level > 0) H5Pset_deflate(list.id(), static_cast<unsigned>(storage.deflate_level));
  if (storage.fletcher32) H5Pset_fletcher32(list.id());
  return list;
}

/// Chunk filters as the library's own, outside its lock and several times faster; memory is kept from chunk
/// to chunk.
class ChunkFilter {
 public:
  ChunkFilter(const DatasetStorage& storage, std::size_t element_bytes)
      : shuffle_(storage.shuffle), element_bytes_(element_bytes) {
    if (storage.deflate_level > 0) compressor_.reset(libdeflate_alloc_compressor(storage.deflate_level));
    if (storage.deflate_level > 0 && !compressor_) throw std::bad_alloc();
  }

  struct Stored {
    std::span<const std::byte> bytes;
    std::uint32_t skipped_filters = 0;
  };
  Stored stored(std::span<const std::byte> raw) {
    if (shuffle_) raw = shuffled(raw);
    if (!compressor_) return {raw, 0};
    deflated_.resize(raw.size());
    const std::size_t bytes = libdeflate_zlib_compress(compressor_.get(), raw.data(), raw.size(),
                                                       deflated_.data(), deflated_.size());
    if (bytes != 0) return {std::span(deflated_).first(bytes), 0};
    return {raw,
            shuffle_ ? 2U : 1U};  // it would grow: deflate is marked as skipped, by its place in the pipeline
  }

 private:
  std::span<const std::byte> shuffled(std::span<const std::byte> raw) {
    shuffled_.resize(raw.size());
    const std::size_t elements = raw.size() / element_bytes_;
    for (std::size_t byte = 0; byte < element_bytes_; ++byte) {
      std::byte* plane = shuffled_.data() + byte * elements;
      for (std::size_t i = 0; i < elements; ++i) plane[i] = raw[i * element_bytes_ + byte];
    }
    return shuffled_;
  }

  struct FreeCompressor {
    void operator()(libdeflate_compressor* compressor) const { libdeflate_free_compressor(compressor); }
  };
  bool shuffle_;
  std::size_t element_bytes_;
  std::unique_ptr<libdeflate_compressor, FreeCompressor> compressor_;
  std::vector<std::byte> shuffled_, deflated_;
};

/// Copies the box of `source` [shape] that starts at `start` into a chunk, zeros beyond the edge.
void gather_chunk(const std::byte* source,
                  std::span<const std::uint64_t> shape,
                  std::span<const std::uint64_t> start,
                  std::span<const std::uint64_t> chunk,
                  std::size_t element_bytes,
                  std::byte* out) {
  const std::uint64_t inner_shape = product(shape.subspan(1)), inner_chunk = product(chunk.subspan(1));
  const std::uint64_t inside = std::min(chunk[0], shape[0] - start[0]);
  if (shape.size() == 1 || inner_shape == inner_chunk) {
    std::memcpy(out, source + start[0] * inner_shape * element_bytes, inside * inner_chunk * element_bytes);
  } else {
    for (std::uint64_t i = 0; i < inside; ++i) {
      gather_chunk(source + (start[0] + i) * inner_shape * element_bytes, shape.subspan(1), start.subspan(1),
                   chunk.subspan(1), element_bytes, out + i * inner_chunk * element_bytes);
    }
  }
  std::memset(out + inside * inner_chunk * element_bytes, 0,
              (chunk[0] - inside) * inner_chunk * element_bytes);
}

/// The next place in a grid, last index fastest; false after the last.
bool advance(std::vector<std::uint64_t>& place,
             std::span<const std::uint64_t> shape,
             std::span<const std::uint64_t> step) {
  for (std::size_t axis = place.size(); axis-- > 0;) {
    place[axis] += step[axis];
    if (place[axis] < shape[axis]) return true;
    place[axis] = 0;
  }
  return false;
}

/// Lets a file that will not be completed go. After a failed write (a full disk) the library would keep it
/// open and try again, at the latest when the program ends; so whatever it still wants to write goes into a
/// nameless file.
void abandon(Handle& file) {
  int* descriptor = nullptr;
  if (H5Fget_vfd_handle(file.id(), H5P_DEFAULT, reinterpret_cast<void**>(&descriptor)) >= 0) {
    const int nowhere = ::memfd_create("abandoned", MFD_CLOEXEC);
    if (nowhere >= 0) {
      ::dup2(nowhere, *descriptor);
      ::close(nowhere);
    }
  }
  file.release();
}

/// A dataset between begin() and close().
struct OpenDataset {
  Handle handle;
  hid_t type = H5I_INVALID_HID;
  std::size_t element_bytes = 0;
  std::vector<std::uint64_t> shape;
  DatasetStorage storage;
  std::optional<ChunkFilter> filter;  // absent: the library writes

  bool takes_whole_chunks(std::uint64_t first, std::uint64_t count) const {
    return filter && first % storage.chunk[0] == 0 &&
           (count % storage.chunk[0] == 0 || first + count == shape[0]);
  }
};

bool write_by_library(const OpenDataset& dataset,
                      std::uint64_t first,
                      std::uint64_t count,
                      const void* data) {
  std::vector<hsize_t> start(dataset.shape.size(), 0), extent(dataset.shape.begin(), dataset.shape.end());
  start[0] = first;
  extent[0] = count;
  const Handle file_space(H5Dget_space(dataset.handle.id()));
  const Handle memory_space(H5Screate_simple(static_cast<int>(extent.size()), extent.data(), nullptr));
  return H5Sselect_hyperslab(file_space.id(), H5S_SELECT_SET, start.data(), nullptr, extent.data(),
                             nullptr) >= 0 &&
         H5Dwrite(dataset.handle.id(), dataset.type, memory_space.id(), file_space.id(), H5P_DEFAULT, data) >=
             0;
}

}  // namespace

struct Hdf5Writer::State {
  std::string subject;  // for messages
  Handle file;
  bool in_memory = false;
  std::map<std::string, OpenDataset> open;
  std::map<std::string, std::vector<ScaleUse>> scale_uses;
  std::vector<std::byte> chunk;  // scratch

  ~State() {
    const LibraryCall call;
    open.clear();
    if (!file.valid()) return;
    if (in_memory) {
      file.release();
    } else {
      abandon(file);
    }
  }

  Expected<void> create_dataset(const std::string& path, OpenDataset dataset);
  Expected<void> write_chunks(OpenDataset& dataset,
                              std::uint64_t first,
                              std::uint64_t count,
                              std::span<const std::byte> data);
  Expected<void> append(const std::string& path,
                        hid_t type,
                        std::uint64_t first,
                        std::uint64_t count,
                        std::span<const std::byte> data);
};

Expected<void> Hdf5Writer::State::create_dataset(const std::string& path, OpenDataset dataset) {
  if (open.contains(path)) throw std::invalid_argument("Hdf5Writer: " + path + " is begun twice");
  const auto& step = dataset.storage.chunk;
  if (!step.empty() && step.size() != dataset.shape.size()) {
    throw std::invalid_argument("Hdf5Writer: chunk and shape differ in dimensions");
  }
  // A chunk that is compressed with a checksum is left to the library, as is every other rare case.
  if (!step.empty() && !dataset.storage.fletcher32)
    dataset.filter.emplace(dataset.storage, dataset.element_bytes);

  const LibraryCall call;
  const std::vector<hsize_t> extents(dataset.shape.begin(), dataset.shape.end());
  const Handle space(extents.empty()
                         ? H5Screate(H5S_SCALAR)
                         : H5Screate_simple(static_cast<int>(extents.size()), extents.data(), nullptr));
  const Handle links(H5Pcreate(H5P_LINK_CREATE));
  H5Pset_create_intermediate_group(links.id(), 1);
  const Handle creation = creation_list(dataset.storage);
  dataset.handle = Handle(
      H5Dcreate2(file.id(), path.c_str(), dataset.type, space.id(), links.id(), creation.id(), H5P_DEFAULT));
  if (!dataset.handle.valid()) return call.failure("creating the dataset " + path, subject);
  open.insert_or_assign(path, std::move(dataset));
  return {};
}

Expected<void> Hdf5Writer::State::write_chunks(OpenDataset& dataset,
                                               std::uint64_t first,
                                               std::uint64_t count,
                                               std::span<const std::byte> data) {
  std::vector<std::uint64_t> shape = dataset.shape;
  shape[0] = count;
  const auto& step = dataset.storage.chunk;
  chunk.resize(product(step) * dataset.element_bytes);
  std::vector<std::uint64_t> place(shape.size(), 0);
  if (product(shape) == 0) return {};
  do {
    gather_chunk(data.data(), shape, place, step, dataset.element_bytes, chunk.data());
    const ChunkFilter::Stored stored = dataset.filter->stored(chunk);
    std::vector<hsize_t> offset(place.begin(), place.end());
    offset[0] += first;
    const LibraryCall call;
    if (H5Dwrite_chunk(dataset.handle.id(), H5P_DEFAULT, stored.skipped_filters, offset.data(),
                       stored.bytes.size(), stored.bytes.data()) < 0) {
      return call.failure("writing a chunk", subject);
    }
  } while (advance(place, shape, step));
  return {};
}

Expected<void> Hdf5Writer::State::append(const std::string& path,
                                         hid_t type,
                                         std::uint64_t first,
                                         std::uint64_t count,
                                         std::span<const std::byte> data) {
  const auto found = open.find(path);
  if (found == open.end()) throw std::invalid_argument("Hdf5Writer: append to " + path + " before begin");
  OpenDataset& dataset = found->second;
  const std::uint64_t entry_bytes = product(std::span(dataset.shape).subspan(1)) * dataset.element_bytes;
  if (type != dataset.type || data.size() != count * entry_bytes || first + count > dataset.shape[0]) {
    throw std::invalid_argument("Hdf5Writer: what is appended does not fit into " + path);
  }
  if (dataset.takes_whole_chunks(first, count)) return write_chunks(dataset, first, count, data);
  const LibraryCall call;
  if (!write_by_library(dataset, first, count, data.data())) return call.failure("writing " + path, subject);
  return {};
}

Hdf5Writer::Hdf5Writer(std::unique_ptr<State> state) : state_(std::move(state)) {}
Hdf5Writer::Hdf5Writer(Hdf5Writer&&) noexcept = default;
Hdf5Writer::~Hdf5Writer() = default;

namespace {

Handle file_creation_list() {
  Handle list(H5Pcreate(H5P_FILE_CREATE));
  H5Pset_obj_track_times(list.id(), false);
  return list;
}

}  // namespace

Expected<Hdf5Writer> Hdf5Writer::create(const std::filesystem::path& path) {
  auto state = std::make_unique<State>();
  state->subject = path.string();
  const LibraryCall call;
  const Handle access(H5Pcreate(H5P_FILE_ACCESS));
  state->file = Handle(H5Fcreate(path.c_str(), H5F_ACC_TRUNC, file_creation_list().id(), access.id()));
  if (!state->file.valid()) return call.failure("creating the file", path.string());
  return Hdf5Writer(std::move(state));
}

Expected<Hdf5Writer> Hdf5Writer::in_memory() {
  // The library tells open files without a descriptor apart by their names alone.
  static std::atomic<std::uint64_t> number{0};
  constexpr std::size_t growth_bytes = 64 * 1024;
  auto state = std::make_unique<State>();
  state->subject = fmt::format("in-memory-{}.h5", number++);
  state->in_memory = true;
  const LibraryCall call;
  const Handle access(H5Pcreate(H5P_FILE_ACCESS));
  H5Pset_fapl_core(access.id(), growth_bytes, /*backing_store=*/false);
  state->file =
      Handle(H5Fcreate(state->subject.c_str(), H5F_ACC_TRUNC, file_creation_list().id(), access.id()));
  if (!state->file.valid()) return call.failure("creating a file in memory", state->subject);
  return Hdf5Writer(std::move(state));
}

Expected<void> Hdf5Writer::attribute(const std::string& object,
                                     const std::string& name,
                                     const AttributeValue& value) {
  const LibraryCall call;
  const Handle target(H5Oopen(state_->file.id(), object.c_str(), H5P_DEFAULT));
  if (!target.valid() || !write_attribute(target.id(), name.c_str(), value)) {
    return call.failure("writing the attribute " + name + " of " + object, state_->subject);
  }
  return {};
}

template <class Element>
Expected<void> Hdf5Writer::begin(const std::string& path,
                                 std::span<const std::uint64_t> shape,
                                 const DatasetStorage& storage) {
  OpenDataset dataset;
  dataset.type = element_type<Element>();
  dataset.element_bytes = sizeof(Element);
  dataset.shape.assign(shape.begin(), shape.end());
  dataset.storage = storage;
  return state_->create_dataset(path, std::move(dataset));
}

template <class Element>
Expected<void> Hdf5Writer::append(const std::string& path,
                                  std::uint64_t first,
                                  std::uint64_t count,
                                  std::span<const Element> data) {
  return state_->append(path, element_type<Element>(), first, count, std::as_bytes(data));
}

template <class Element>
Expected<void> Hdf5Writer::dataset(const std::string& path,
                                   std::span<const std::uint64_t> shape,
                                   std::span<const Element> data) {
  if (data.size() != product(shape))
    throw std::invalid_argument("Hdf5Writer: shape and data differ for " + path);
  if (auto begun = begin<Element>(path, shape, {}); !begun) return begun;
  const LibraryCall call;
  const OpenDataset& created = state_->open.at(path);
  const bool empty = data.empty();
  if (!empty && H5Dwrite(created.handle.id(), created.type, H5S_ALL, H5S_ALL, H5P_DEFAULT, data.data()) < 0) {
    return call.failure("writing " + path, state_->subject);
  }
  state_->open.erase(path);
  return {};
}

Expected<void> Hdf5Writer::axes(const std::string& path, std::span<const std::string> axes) {
  const LibraryCall call;
  const hid_t file = state_->file.id();
  const auto failed = [&] { return call.failure("naming the axes of " + path, state_->subject); };
  const Handle dataset(H5Dopen2(file, path.c_str(), H5P_DEFAULT));
  ScaleUse use{};
  if (!dataset.valid() || H5Rcreate(&use.dataset, file, path.c_str(), H5R_OBJECT, -1) < 0) return failed();

  std::vector<std::optional<hobj_ref_t>> scales(axes.size());
  for (std::size_t i = 0; i < axes.size(); ++i) {
    if (axes[i].empty()) continue;
    const Handle scale(H5Dopen2(file, axes[i].c_str(), H5P_DEFAULT));
    if (!scale.valid() || H5Rcreate(&scales[i].emplace(), file, axes[i].c_str(), H5R_OBJECT, -1) < 0)
      return failed();
    use.dimension = static_cast<std::int32_t>(i);
    auto& uses = state_->scale_uses[axes[i]];
    uses.push_back(use);
    const std::string name = axes[i].substr(axes[i].rfind('/') + 1);
    if (!write_fixed_text(scale.id(), "CLASS", "DIMENSION_SCALE") ||
        !write_fixed_text(scale.id(), "NAME", name) || !write_scale_uses(scale.id(), uses)) {
      return failed();
    }
  }
  if (!write_dimension_list(dataset.id(), scales)) return failed();
  return {};
}

Expected<void> Hdf5Writer::close() {
  const LibraryCall call;
  state_->open.clear();
  if (H5Fflush(state_->file.id(), H5F_SCOPE_LOCAL) < 0)
    return call.failure("writing the file", state_->subject);
  if (!state_->file.release()) return call.failure("closing the file", state_->subject);
  return {};
}

Expected<std::vector<std::byte>> Hdf5Writer::image() {
  if (!state_->in_memory) throw std::invalid_argument("Hdf5Writer: image() of a file that is not in memory");
  const LibraryCall call;
  state_->open.clear();
  const auto failed = [&] { return call.failure("taking the file's bytes", state_->subject); };
  if (H5Fflush(state_->file.id(), H5F_SCOPE_LOCAL) < 0) return failed();
  const ssize_t size = H5Fget_file_image(state_->file.id(), nullptr, 0);
  if (size < 0) return failed();
  std::vector<std::byte> bytes(static_cast<std::size_t>(size));
  if (H5Fget_file_image(state_->file.id(), bytes.data(), bytes.size()) < 0) return failed();
  state_->file.release();
  return bytes;
}

#define BENTLIGHT_WRITES(Element)                                                                        \
  template Expected<void> Hdf5Writer::dataset(const std::string&, std::span<const std::uint64_t>,        \
                                              std::span<const Element>);                                 \
  template Expected<void> Hdf5Writer::begin<Element>(const std::string&, std::span<const std::uint64_t>, \
                                                     const DatasetStorage&);                             \
  template Expected<void> Hdf5Writer::append(const std::string&, std::uint64_t, std::uint64_t,           \
                                             std::span<const Element>);
BENTLIGHT_WRITES(double)
BENTLIGHT_WRITES(float)
BENTLIGHT_WRITES(std::uint8_t)
BENTLIGHT_WRITES(std::int64_t)
#undef BENTLIGHT_WRITES

}  // namespace bentlight::archive
