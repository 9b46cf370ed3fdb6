// How the HDF5 library reads in the cage: through a file that is already open, and through no other.
#pragma once

#include <hdf5.h>

#include <cstddef>
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <utility>

#include "probe/handle.h"

namespace bentlight::probe {

/// Where a read of raw data was aimed at: an absolute place in the file.
struct RawRead {
  std::uint64_t offset = 0;
  std::uint64_t bytes = 0;
};

/// The one file of this process, read through its descriptor by a virtual file driver of our own.
///
/// A driver of our own gives three things: the process needs no right to open anything; metadata can be
/// digested as the library reads it; and the address of a chunk is learned from the read that the library
/// would make of it, which costs O(1) where H5Dget_chunk_info walks the whole index each time (HDF5 1.10).
///
///   threads  one
class FdFile {
 public:
  /// Where the file is found by H5Fopen; every other name is refused and remembered.
  static constexpr const char* name = "/file";

  FdFile(int descriptor, std::uint64_t bytes) : descriptor_(descriptor), bytes_(bytes) {}
  FdFile(const FdFile&) = delete;
  FdFile& operator=(const FdFile&) = delete;

  /// Access properties under which H5Fopen(FdFile::name) reads this file. This object outlives the file's
  /// handle.
  Handle access();

  std::uint64_t bytes() const { return bytes_; }

  /// Fills `out` from `offset`; false when the file ends before that.
  bool read(std::uint64_t offset, void* out, std::size_t bytes) const;

  /// While recording, reads of raw data are noted instead of made, and leave their buffer alone.
  void record_raw_reads(bool on) { recording_ = on; }
  /// The last read since the last call; then forgotten.
  std::optional<RawRead> take_raw_read() { return std::exchange(raw_read_, std::nullopt); }

  /// The name of another file that something in this one led to (an external link, a source of a virtual
  /// dataset).
  const std::optional<std::string>& refused_name() const { return refused_name_; }

  /// SHA-256 over the pieces of metadata that the library has read so far, in the order of their addresses.
  std::string metadata_digest() const;

 private:
  friend struct DriverCalls;

  int descriptor_;
  std::uint64_t bytes_;
  bool recording_ = false;
  std::optional<RawRead> raw_read_;
  std::optional<std::string> refused_name_;
  std::map<std::pair<std::uint64_t, std::uint64_t>, std::string> metadata_;  // (address, bytes) to digest
};

}  // namespace bentlight::probe
