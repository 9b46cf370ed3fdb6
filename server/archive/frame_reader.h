// Bytes into frames: positioned reads by the frame map, decoding, and gathering of an aperture's points.
#pragma once

#include <cstddef>
#include <memory>
#include <vector>

#include "archive/frame_decode.h"
#include "archive/frame_gather.h"
#include "archive/wavefront_file.h"
#include "base/error.h"
#include "base/file.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"

namespace bentlight::archive {

/// Reads frames of one view.
///
///   threads  safe from any thread, each with a Scratch of its own
class FrameReader {
 public:
  /// Memory that one thread reuses from call to call.
  struct Scratch {
    std::vector<std::byte> stored;
    DecodeScratch decode;
    std::vector<std::byte> elements;
    std::vector<RowSegment> segments;
    GatherState gather;
  };

  /// Opens `path` for reading by `map`.
  ///
  ///   errors  file_missing, permission_denied; file_changed when the file is not in the state of `identity`
  static Expected<FrameReader> open(const FileSystem& files,
                                    const std::filesystem::path& path,
                                    FrameMap map,
                                    const FileIdentity& identity);

  std::size_t frames() const { return static_cast<std::size_t>(map_.frames()); }

  /// How many frames are best read at once: whole chunks, or pieces that stay inside a core's cache. Ranges
  /// that start at a multiple of it decode no chunk twice.
  std::size_t natural_frames() const;

  /// Bytes of the file that a range touches, as stored, for plans and progress.
  std::uint64_t stored_bytes(optics::FrameRange range) const;

  /// Memory that a Scratch and a block of `range.count` frames take.
  std::size_t memory_bytes(std::size_t frames, std::size_t points) const;

  /// Fills `block` with the aperture's points of `range`. A frame's shift is its value at its first point or,
  /// when that is not finite, at some point that is; a frame with none has shift 0.
  ///
  ///   needs   a range within frames(), an aperture on the map's grid
  ///   errors  damaged_file (a chunk does not decode, or fails its checksum), file_changed, io_error
  ///   throws  std::invalid_argument when a need is not met
  Expected<void> read(optics::FrameRange range,
                      const optics::Aperture& aperture,
                      optics::FrameBlock& block,
                      Scratch& scratch) const;

  /// Says whether the file is still the one that was indexed; asked after the last read of an answer, so that
  /// a file rewritten meanwhile cannot slip in.
  ///
  ///   errors  file_changed
  Expected<void> verify_unchanged() const;

 private:
  FrameReader(std::unique_ptr<ReadFile> file, FrameMap map, FileStamp stamp);

  std::unique_ptr<ReadFile> file_;
  FrameMap map_;
  FileStamp stamp_;
};

}  // namespace bentlight::archive
