#include "ingest/summarize.h"

#include <algorithm>
#include <map>
#include <memory>
#include <mutex>
#include <vector>

#include "base/limits.h"
#include "optics/modes.h"
#include "optics/summary.h"

namespace bentlight::ingest {

namespace {

using index::SummaryData;
using optics::FrameRange;

/// Frames to a block of maps: whole chunks, near the usual number.
std::size_t block_length(std::size_t natural) {
  const std::size_t chunks = std::max<std::size_t>(1, (limits::summary_block_frames + natural / 2) / natural);
  return chunks * natural;
}

/// Frames that a lane holds at a time: whole chunks, near 4 MiB of points.
std::size_t piece_length(std::size_t natural, std::size_t points) {
  const std::size_t wanted = 4 * limits::mebi / (points * sizeof(float));
  return std::max<std::size_t>(1, wanted / natural) * natural;
}

/// As many modes as the aperture tells apart, up to those that a summary keeps and that memory holds.
Expected<optics::ModeBasis> summary_basis(const optics::Aperture& aperture) {
  constexpr std::size_t mode_bytes = sizeof(double) + sizeof(float);  // at a point
  const std::size_t affordable = limits::summary_basis_bytes / (mode_bytes * aperture.points());
  for (std::size_t modes = std::min(limits::summary_modes, affordable); modes > 3; --modes) {
    if (auto basis = optics::ModeBasis::zernike(aperture, modes)) return basis;
  }
  return optics::ModeBasis::zernike(aperture, 3);
}

/// Puts the blocks' maps in order, whichever lane is done first: the sums are the same for any number of
/// threads.
///
///   threads  safe from any thread
class BlockOrder {
 public:
  BlockOrder(index::SummaryWriter& writer, std::size_t points)
      : writer_(writer), record_(optics::MomentMaps::of(points)) {}

  /// errors  as SummaryWriter::add_block
  Expected<void> put(std::size_t block, optics::MomentMaps maps) {
    const std::lock_guard lock(mutex_);
    waiting_.emplace(block, std::move(maps));
    for (; !waiting_.empty() && waiting_.begin()->first == next_; ++next_) {
      optics::MomentMaps next = std::move(waiting_.extract(waiting_.begin()).mapped());
      record_.merge(next);
      if (auto added = writer_.add_block(std::move(next)); !added) return added;
    }
    return {};
  }

  /// Moments of all blocks. Once all are put.
  optics::MomentMaps take_record() { return std::move(record_); }

 private:
  std::mutex mutex_;  // guards the members below
  index::SummaryWriter& writer_;
  optics::MomentMaps record_;
  std::map<std::size_t, optics::MomentMaps> waiting_;
  std::size_t next_ = 0;
};

class Summarizer {
 public:
  Summarizer(const archive::FrameReader& reader,
             const optics::Grid& grid,
             const optics::Aperture& aperture,
             const optics::ModeBasis& basis,
             const SummarizeOptions& options,
             WorkPool& pool,
             const std::stop_token& stop,
             std::atomic<std::uint64_t>& bytes_done)
      : reader_(reader),
        aperture_(aperture),
        basis_(basis),
        pool_(pool),
        stop_(stop),
        bytes_done_(bytes_done),
        room_(options.retained_bytes) {
    data_.frames = reader.frames();
    data_.points = aperture.points();
    data_.modes = basis.count();
    data_.block_frames = block_length(reader.natural_frames());
    data_.rows = grid.rows;
    data_.columns = grid.columns;
    data_.mask = grid.mask;
    data_.coefficients.resize(data_.modes * data_.frames);
    for (auto* series : {&data_.residual, &data_.residual_fluctuation, &data_.tilt_removed,
                         &data_.tilt_removed_fluctuation}) {
      series->resize(data_.frames);
    }
    data_.finite.resize(data_.frames);
    blocks_ = (data_.frames + data_.block_frames - 1) / data_.block_frames;
    cut_pieces(piece_length(reader.natural_frames(), data_.points));
    retained_.resize(pieces_.size());
  }

  Expected<SummaryData> run(const FileSystem& files, const std::filesystem::path& folder) {
    auto writer = index::SummaryWriter::start(files, folder, data_.points, blocks_);
    if (!writer) return failure(writer);
    BlockOrder order(*writer, data_.points);
    if (auto first = first_pass(order); !first) return failure(first);
    take_means(order.take_record());
    if (auto second = second_pass(); !second) return failure(second);
    if (auto finished = writer->finish(data_); !finished) return failure(finished);
    return std::move(data_);
  }

 private:
  struct Lane {
    optics::FrameBlock block;
    archive::FrameReader::Scratch scratch;
  };

  void cut_pieces(std::size_t longest) {
    for (std::size_t first = 0; first < data_.frames;) {
      const std::size_t block_end =
          std::min(data_.frames, (first / data_.block_frames + 1) * data_.block_frames);
      const std::size_t end = std::min(block_end, first + longest);
      pieces_.push_back({first, end - first});
      first = end;
    }
  }

  Expected<void> read(FrameRange piece, Lane& lane) {
    return reader_.read(piece, aperture_, lane.block, lane.scratch);
  }

  Expected<void> first_pass(BlockOrder& order) {
    std::vector<Lane> lanes(pool_.lanes());
    std::vector<std::unique_ptr<optics::BlockSummarizer>> summarizers(lanes.size());
    return pool_.for_each(blocks_, stop_, [&](std::size_t block, std::size_t lane_index) -> Expected<void> {
      Lane& lane = lanes[lane_index];
      auto& summarizer = summarizers[lane_index];
      if (!summarizer) summarizer = std::make_unique<optics::BlockSummarizer>(basis_);
      optics::MomentMaps maps = optics::MomentMaps::of(data_.points);
      for (std::size_t i = first_piece(block); i < pieces_.size() && block_of(pieces_[i]) == block; ++i) {
        if (auto got = read(pieces_[i], lane); !got) return got;
        const optics::BlockSummary summary = summarizer->summarize(lane.block);
        keep(summary);
        maps.merge(summary.maps);
        retain(i, lane.block);
      }
      return order.put(block, std::move(maps));
    });
  }

  Expected<void> second_pass() {
    std::vector<Lane> lanes(pool_.lanes());
    const auto fluctuation =
        optics::BlockFluctuation::make(aperture_, basis_, data_.steady_lensing, data_.mean_coefficients);
    if (!fluctuation) return failure(fluctuation);
    std::vector<optics::BlockFluctuation> of_lane(lanes.size(), *fluctuation);
    return pool_.for_each(
        pieces_.size(), stop_, [&](std::size_t i, std::size_t lane_index) -> Expected<void> {
          Lane& lane = lanes[lane_index];
          if (auto got = recall(i, lane); !got) return got;
          const FrameRange piece = pieces_[i];
          std::vector<double> coefficients(data_.modes * piece.count);
          for (std::size_t k = 0; k < data_.modes; ++k) {
            const auto row =
                data_.coefficients.begin() + static_cast<std::ptrdiff_t>(k * data_.frames + piece.first);
            std::copy_n(row, piece.count,
                        coefficients.begin() + static_cast<std::ptrdiff_t>(k * piece.count));
          }
          const auto values = of_lane[lane_index].add(lane.block, coefficients);
          const auto at = static_cast<std::ptrdiff_t>(piece.first);
          std::ranges::copy(values.residual, data_.residual_fluctuation.begin() + at);
          std::ranges::copy(values.tilt_removed, data_.tilt_removed_fluctuation.begin() + at);
          return {};
        });
  }

  /// Means over the record's finite frames.
  void take_means(optics::MomentMaps record) {
    data_.steady_lensing = std::move(record.mean);
    data_.mean_coefficients.assign(data_.modes, 0.0);
    if (record.count == 0) return;
    for (std::size_t k = 0; k < data_.modes; ++k) {
      double sum = 0.0;  // frames that are not finite hold zeros
      for (std::size_t t = 0; t < data_.frames; ++t) sum += data_.coefficients[k * data_.frames + t];
      data_.mean_coefficients[k] = sum / static_cast<double>(record.count);
    }
  }

  void keep(const optics::BlockSummary& summary) {
    const std::size_t count = summary.frames.count;
    const auto at = static_cast<std::ptrdiff_t>(summary.frames.first);
    for (std::size_t k = 0; k < data_.modes; ++k) {
      std::copy_n(summary.coefficients.begin() + static_cast<std::ptrdiff_t>(k * count), count,
                  data_.coefficients.begin() + static_cast<std::ptrdiff_t>(k * data_.frames) + at);
    }
    std::ranges::copy(summary.residual, data_.residual.begin() + at);
    std::ranges::copy(summary.tilt_removed, data_.tilt_removed.begin() + at);
    std::ranges::copy(summary.finite, data_.finite.begin() + at);
  }

  /// Keeps a piece for the second pass while there is room.
  void retain(std::size_t i, optics::FrameBlock& block) {
    const std::size_t bytes = block.values.size() * sizeof(float);
    std::size_t room = room_.load();
    while (room >= bytes && !room_.compare_exchange_weak(room, room - bytes)) {
    }
    if (room >= bytes) retained_[i] = std::move(block.values);
    bytes_done_ += reader_.stored_bytes(pieces_[i]) / (room >= bytes ? 1 : 2);
  }

  /// The piece as the first pass left it, or from the file again.
  Expected<void> recall(std::size_t i, Lane& lane) {
    if (retained_[i].empty()) {
      bytes_done_ += reader_.stored_bytes(pieces_[i]) / 2;
      return read(pieces_[i], lane);
    }
    lane.block.resize(pieces_[i], data_.points);
    lane.block.values = std::move(retained_[i]);
    std::ranges::fill(lane.block.shift_m, 0.0);
    std::copy_n(data_.finite.begin() + static_cast<std::ptrdiff_t>(pieces_[i].first), pieces_[i].count,
                lane.block.finite.begin());
    return {};
  }

  std::size_t block_of(FrameRange piece) const { return piece.first / data_.block_frames; }
  std::size_t first_piece(std::size_t block) const {
    const auto found = std::ranges::lower_bound(pieces_, block * data_.block_frames, {}, &FrameRange::first);
    return static_cast<std::size_t>(found - pieces_.begin());
  }

  const archive::FrameReader& reader_;
  const optics::Aperture& aperture_;
  const optics::ModeBasis& basis_;
  WorkPool& pool_;
  const std::stop_token& stop_;
  std::atomic<std::uint64_t>& bytes_done_;
  std::atomic<std::size_t> room_;
  SummaryData data_;
  std::size_t blocks_ = 0;
  std::vector<FrameRange> pieces_;            // each within one block
  std::vector<std::vector<float>> retained_;  // [pieces]; V of the first pass, or empty
};

}  // namespace

Expected<index::SummaryData> summarize_view(const archive::FrameReader& reader,
                                            const optics::Grid& grid,
                                            const optics::Aperture& aperture,
                                            const FileSystem& files,
                                            const std::filesystem::path& folder,
                                            const SummarizeOptions& options,
                                            WorkPool& pool,
                                            const std::stop_token& stop,
                                            std::atomic<std::uint64_t>& bytes_done) {
  const auto basis = summary_basis(aperture);
  if (!basis) return failure(basis);
  return Summarizer(reader, grid, aperture, *basis, options, pool, stop, bytes_done).run(files, folder);
}

}  // namespace bentlight::ingest
