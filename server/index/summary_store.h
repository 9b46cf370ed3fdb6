// Keeping summaries: NPY files in a view's sealed folder, of which only the bytes a question needs are read.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <memory>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/file.h"
#include "base/sealed_folder.h"
#include "optics/frame_block.h"
#include "optics/moment_maps.h"

namespace bentlight::index {

/// What indexing found, as optics/summary.h defines it. Metres and metres squared; frames that are not finite
/// hold zeros.
struct SummaryData {
  std::size_t frames = 0, points = 0, modes = 0, block_frames = 0, rows = 0, columns = 0;
  std::vector<double> coefficients;              // [modes][frames]
  std::vector<double> residual;                  // [frames]
  std::vector<double> residual_fluctuation;      // [frames]
  std::vector<double> tilt_removed;              // [frames]
  std::vector<double> tilt_removed_fluctuation;  // [frames]
  std::vector<std::uint8_t> finite;              // [frames]
  std::vector<double> mean_coefficients;         // [modes], over finite frames
  std::vector<double> steady_lensing;            // [points], without piston, tip and tilt
  std::vector<std::uint8_t> mask;                // [rows][columns]; the native aperture
};

/// Writes a summary's files into a folder that is not published yet.
///
/// The maps of the blocks go to disk as they come, as float, each followed by the nodes of the tree that it
/// completes: a node is the merge of two of the level below. So a view of any length is indexed in the same
/// memory.
///
///   threads  one at a time
class SummaryWriter {
 public:
  /// errors  as FileSystem::start
  static Expected<SummaryWriter> start(const FileSystem& files,
                                       std::filesystem::path folder,
                                       std::size_t points,
                                       std::size_t blocks);

  /// Takes the next block's moments of frames without piston, tip and tilt.
  ///
  ///   errors  disk_full, io_error
  ///   throws  std::invalid_argument beyond the blocks that were announced
  Expected<void> add_block(optics::MomentMaps maps);

  /// Writes the rest. Nothing can be added after this.
  ///
  ///   errors  disk_full, io_error
  ///   throws  std::invalid_argument when blocks are missing
  Expected<void> finish(const SummaryData& summary);

 private:
  SummaryWriter(const FileSystem& files, std::filesystem::path folder, std::size_t blocks)
      : files_(&files), folder_(std::move(folder)), blocks_(blocks) {}
  Expected<void> add_node(const optics::MomentMaps& maps);

  const FileSystem* files_;
  std::filesystem::path folder_;
  std::size_t blocks_, added_ = 0;
  std::unique_ptr<NewFile> means_, m2s_;  // [nodes][points]
  std::vector<std::int64_t> counts_;      // [nodes so far]
  std::vector<optics::MomentMaps>
      unpaired_;  // nodes that wait for their neighbour, from the highest level down
};

/// Reads parts of a summary.
///
///   errors   damaged_state from every function
///   threads  safe from any thread; cheap to copy
class SummaryReader {
 public:
  static Expected<SummaryReader> open(std::shared_ptr<const SealedFolder> folder);

  std::size_t modes() const { return shape_.modes; }
  std::size_t frames() const { return shape_.frames; }
  std::size_t points() const { return shape_.points; }
  std::size_t block_frames() const { return shape_.block_frames; }

  /// Coefficient of mode k, from 1. [range.count]
  Expected<std::vector<double>> coefficient(std::size_t k, optics::FrameRange range) const;
  /// Mean square with all summary modes removed; `fluctuation`: and the steady lensing. [range.count]
  Expected<std::vector<double>> residual(optics::FrameRange range, bool fluctuation) const;
  /// Mean square with piston, tip and tilt removed. [range.count]
  Expected<std::vector<double>> tilt_removed(optics::FrameRange range, bool fluctuation) const;
  Expected<std::vector<std::uint8_t>> finite(optics::FrameRange range) const;
  Expected<std::vector<double>> mean_coefficients() const;
  Expected<std::vector<double>> steady_lensing() const;
  Expected<std::vector<std::uint8_t>> mask() const;

  /// Moments of the frames of `count` blocks from `first` on, merged from the fewest nodes of the tree.
  Expected<optics::MomentMaps> maps(std::size_t first, std::size_t count) const;

 private:
  struct Shape {
    std::size_t frames = 0, points = 0, modes = 0, block_frames = 0, blocks = 0, rows = 0, columns = 0;
  };
  SummaryReader(std::shared_ptr<const SealedFolder> folder, const Shape& shape)
      : folder_(std::move(folder)), shape_(shape) {}

  template <class Element>
  Expected<std::vector<Element>> part(const std::string& name, std::size_t first, std::size_t count) const;
  Expected<optics::MomentMaps> node(std::size_t level, std::size_t number) const;

  std::shared_ptr<const SealedFolder> folder_;
  Shape shape_;
};

}  // namespace bentlight::index
