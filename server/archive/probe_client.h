// Asking the probe, the caged second program, what a foreign file holds.
#pragma once

#include <filesystem>
#include <string>

#include "archive/wavefront_file.h"
#include "base/error.h"
#include "base/file.h"

namespace bentlight::archive {

/// Starts the probe on files. The file is opened here and handed over as a descriptor; the child can open
/// nothing.
///
///   threads  safe from any thread; each call has a child of its own
class ProbeClient {
 public:
  /// `program` is the path of bentlight-probe.
  explicit ProbeClient(std::filesystem::path program) : program_(std::move(program)) {}

  /// The structure of a wavefront file, every number verified against the file's size.
  ///
  ///   errors  not_hdf5, damaged_file (also: the child died or ran out of its limits), layout_mismatch,
  ///           unsupported_storage, unsafe_file (external links or storage), too_large, file_missing,
  ///           permission_denied, file_changed when the file changed meanwhile. The text names the reason.
  Expected<WavefrontFile> read_structure(const FileSystem& files,
                                         const std::filesystem::path& file,
                                         const Layout& layout) const;

  /// The file's whole tree as JSON text, for `bentlight inspect`: groups, datasets with shape, type, storage
  /// and filters, attributes.
  Expected<std::string> describe(const FileSystem& files, const std::filesystem::path& file) const;

 private:
  std::filesystem::path program_;
};

}  // namespace bentlight::archive
