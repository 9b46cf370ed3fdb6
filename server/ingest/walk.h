// Finding the archive's wavefront files.
#pragma once

#include <filesystem>
#include <vector>

#include "base/error.h"
#include "base/file.h"

namespace bentlight::ingest {

struct FoundFile {
  std::filesystem::path path;  // relative to the archive
  FileStamp stamp;
};

struct Walk {
  std::vector<FoundFile> files;  // sorted by path
  std::vector<Error>
      unreadable;  // folders and files that could not be looked at; subject is the relative path
};

/// Every file of the archive that may be HDF5 by its ending (.h5, .hdf5, .he5, .nc, .mat). Hidden files and
/// folders are passed over, and so are links that lead out of the archive. An unreadable folder is reported
/// and passed over.
///
///   errors  file_missing, permission_denied when the archive itself cannot be opened
Expected<Walk> walk_archive(const FileSystem& files, const std::filesystem::path& archive);

}  // namespace bentlight::ingest
