#include "probe/fd_driver.h"

#include <unistd.h>

#include <cerrno>
#include <cstdlib>
#include <cstring>
#include <stdexcept>
#include <string_view>

#include "base/digest.h"

namespace bentlight::probe {

namespace {

/// The library copies it about; it holds no more than the way to the file.
struct AccessInfo {
  FdFile* file;
};

/// What the library holds of an open file. H5FD_t comes first, as the library demands.
struct OpenFile {
  H5FD_t base;
  FdFile* file;
  haddr_t end_of_allocation;
};

OpenFile& open_file(H5FD_t* file) {
  return *reinterpret_cast<OpenFile*>(file);
}
const OpenFile& open_file(const H5FD_t* file) {
  return *reinterpret_cast<const OpenFile*>(file);
}

}  // namespace

/// The driver's entries, as H5FDpublic.h of HDF5 1.10 documents them.
struct DriverCalls {
  static void* access_info(H5FD_t* file) {
    auto* info = static_cast<AccessInfo*>(std::malloc(sizeof(AccessInfo)));  // freed by the library
    if (info != nullptr) info->file = open_file(file).file;
    return info;
  }

  static H5FD_t* open(const char* name, unsigned flags, hid_t access, haddr_t) {
    const auto* info = static_cast<const AccessInfo*>(H5Pget_driver_info(access));
    if (info == nullptr) return nullptr;
    if ((flags & H5F_ACC_RDWR) != 0) return nullptr;
    if (std::string_view(name) != FdFile::name) {
      // The library tries a name in several folders; the first is the one that the file gave.
      if (!info->file->refused_name_) info->file->refused_name_ = name;
      return nullptr;
    }
    auto* opened = static_cast<OpenFile*>(std::calloc(1, sizeof(OpenFile)));
    if (opened == nullptr) return nullptr;
    opened->file = info->file;
    return &opened->base;
  }

  static herr_t close(H5FD_t* file) {
    std::free(&open_file(file));
    return 0;
  }

  // There is one file: two openings of it are the same.
  static int compare(const H5FD_t*, const H5FD_t*) { return 0; }

  static herr_t query(const H5FD_t*, unsigned long* flags) {
    if (flags != nullptr) *flags = H5FD_FEAT_SUPPORTS_SWMR_IO;
    return 0;
  }

  static haddr_t end_of_allocation(const H5FD_t* file, H5FD_mem_t) {
    return open_file(file).end_of_allocation;
  }
  static herr_t set_end_of_allocation(H5FD_t* file, H5FD_mem_t, haddr_t end) {
    open_file(file).end_of_allocation = end;
    return 0;
  }
  static haddr_t end_of_file(const H5FD_t* file, H5FD_mem_t) { return open_file(file).file->bytes_; }

  static herr_t read(H5FD_t* opened, H5FD_mem_t type, hid_t, haddr_t offset, size_t bytes, void* out) {
    FdFile& file = *open_file(opened).file;
    if (type == H5FD_MEM_DRAW && file.recording_) {
      file.raw_read_ = RawRead{offset, bytes};
      return 0;
    }
    if (!file.read(offset, out, bytes)) return -1;
    if (type != H5FD_MEM_DRAW) {
      auto& digest = file.metadata_[{offset, bytes}];
      if (digest.empty()) digest = sha256_hex({static_cast<const char*>(out), bytes});
    }
    return 0;
  }

  static herr_t write(H5FD_t*, H5FD_mem_t, hid_t, haddr_t, size_t, const void*) { return -1; }
  static herr_t lock(H5FD_t*, hbool_t) { return 0; }  // a reader beside a writer takes no lock from it
  static herr_t unlock(H5FD_t*) { return 0; }

  static H5FD_class_t table() {
    H5FD_class_t calls{};
    calls.name = "bentlight-fd";
    calls.maxaddr = HADDR_MAX;
    calls.fc_degree = H5F_CLOSE_WEAK;
    calls.fapl_size = sizeof(AccessInfo);
    calls.fapl_get = access_info;
    calls.open = open;
    calls.close = close;
    calls.cmp = compare;
    calls.query = query;
    calls.get_eoa = end_of_allocation;
    calls.set_eoa = set_end_of_allocation;
    calls.get_eof = end_of_file;
    calls.read = read;
    calls.write = write;
    calls.lock = lock;
    calls.unlock = unlock;
    constexpr H5FD_mem_t one_list_for_all[H5FD_MEM_NTYPES] = H5FD_FLMAP_SINGLE;
    std::memcpy(calls.fl_map, one_list_for_all, sizeof calls.fl_map);
    return calls;
  }
};

Handle FdFile::access() {
  const H5FD_class_t calls = DriverCalls::table();
  const Handle driver(H5FDregister(&calls), H5FDunregister);
  Handle access(H5Pcreate(H5P_FILE_ACCESS), H5Pclose);
  const AccessInfo info{this};
  if (!driver || !access || H5Pset_driver(access.id(), driver.id(), &info) < 0) {
    throw std::runtime_error("the HDF5 library does not take the probe's file driver");
  }
  return access;
}

bool FdFile::read(std::uint64_t offset, void* out, std::size_t bytes) const {
  auto* to = static_cast<char*>(out);
  while (bytes > 0) {
    const ssize_t got = ::pread(descriptor_, to, bytes, static_cast<off_t>(offset));
    if (got < 0 && errno == EINTR) continue;
    if (got <= 0) return false;
    to += got;
    offset += static_cast<std::uint64_t>(got);
    bytes -= static_cast<std::size_t>(got);
  }
  return true;
}

std::string FdFile::metadata_digest() const {
  std::string digests;
  for (const auto& [place, digest] : metadata_) digests += digest;
  return sha256_hex(digests);
}

}  // namespace bentlight::probe
