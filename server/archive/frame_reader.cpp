#include "archive/frame_reader.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <stdexcept>
#include <utility>

#include "base/limits.h"

namespace bentlight::archive {

namespace {

// Frames of a transposed, contiguous dataset lie scattered over the whole file, a few bytes at every point:
// only many at once make reads worth their call. 16 MiB of output give 1 KiB to a read at 128 x 128 points.
constexpr std::size_t transposed_block_bytes = 16 * limits::mebi;

// Less than this is read along with its neighbours rather than skipped.
constexpr std::uint64_t skippable_bytes = 64 * limits::kibi;

// Unshuffled at a time: half of a core's first-level cache and more would fall out before it is gathered.
constexpr std::size_t unshuffled_bytes = 64 * limits::kibi;

/// A box of elements along the axes as stored.
struct Box {
  std::array<std::uint64_t, 3> first{};
  std::array<std::uint64_t, 3> count{};
  std::uint64_t end(std::size_t axis) const { return first[axis] + count[axis]; }
  bool is_empty() const { return count[0] == 0 || count[1] == 0 || count[2] == 0; }
};

Box common(const Box& a, const Box& b) {
  Box box;
  for (std::size_t axis = 0; axis < 3; ++axis) {
    box.first[axis] = std::max(a.first[axis], b.first[axis]);
    const std::uint64_t end = std::min(a.end(axis), b.end(axis));
    box.count[axis] = end > box.first[axis] ? end - box.first[axis] : 0;
  }
  return box;
}

/// Which stored axis holds what.
struct Axes {
  explicit Axes(const FrameMap& map)
      : frame(static_cast<std::size_t>(map.axes[0])),
        row(static_cast<std::size_t>(map.axes[1])),
        column(static_cast<std::size_t>(map.axes[2])) {}
  std::size_t frame, row, column;

  GridWindow window(const Box& box) const {
    return {box.first[row], box.end(row), box.first[column], box.end(column)};
  }
};

std::array<std::size_t, 3> strides(const std::array<std::uint64_t, 3>& extent) {
  return {static_cast<std::size_t>(extent[1] * extent[2]), static_cast<std::size_t>(extent[2]), 1};
}

/// The grid of chunks of a dataset; row-major.
struct ChunkGrid {
  explicit ChunkGrid(const FrameMap& map) : extent(map.chunk_shape) {
    for (std::size_t axis = 0; axis < 3; ++axis) {
      chunks[axis] = (map.shape[axis] + extent[axis] - 1) / extent[axis];
    }
  }
  std::array<std::uint64_t, 3> extent;
  std::array<std::uint64_t, 3> chunks{};

  std::uint64_t elements() const { return extent[0] * extent[1] * extent[2]; }
  std::size_t number(const std::array<std::uint64_t, 3>& at) const {
    return static_cast<std::size_t>((at[0] * chunks[1] + at[1]) * chunks[2] + at[2]);
  }

  /// Calls `visit(number, box)` for every chunk that `wanted` touches, until one fails.
  template <class Visit>
  Expected<void> for_each(const Box& wanted, const Visit& visit) const {
    std::array<std::uint64_t, 3> at{};
    for (at[0] = wanted.first[0] / extent[0]; at[0] * extent[0] < wanted.end(0); ++at[0]) {
      for (at[1] = wanted.first[1] / extent[1]; at[1] * extent[1] < wanted.end(1); ++at[1]) {
        for (at[2] = wanted.first[2] / extent[2]; at[2] * extent[2] < wanted.end(2); ++at[2]) {
          const Box box{{at[0] * extent[0], at[1] * extent[1], at[2] * extent[2]}, extent};
          if (auto visited = visit(number(at), box); !visited) return visited;
        }
      }
    }
    return {};
  }
};

/// One call of FrameReader::read: what is wanted, and where it goes.
class Filling {
 public:
  Filling(const ReadFile& file,
          const FrameMap& map,
          optics::FrameRange range,
          const optics::Aperture& aperture,
          optics::FrameBlock& block,
          FrameReader::Scratch& scratch)
      : file_(file),
        map_(map),
        axes_(map),
        conversion_(conversion_of(map)),
        element_bytes_(element_bytes(map.element)),
        range_(range),
        segments_(row_segments(aperture)),
        block_(block),
        scratch_(scratch) {
    wanted_.first[axes_.frame] = range.first;
    wanted_.count[axes_.frame] = range.count;
    const auto [left, right] = columns_of_light();
    wanted_.first[axes_.row] = segments_.front().row;
    wanted_.count[axes_.row] = segments_.back().row + 1 - segments_.front().row;
    wanted_.first[axes_.column] = left;
    wanted_.count[axes_.column] = right - left;
  }

  Expected<void> run() {
    block_.resize(range_, segments_.back().point + segments_.back().count);
    begin_gather(scratch_.gather, range_.count);
    // The boxes that hold the first point go first, for the shifts come from there.
    for (const bool with_first_point : {true, false}) {
      pass_has_first_point_ = with_first_point;
      if (auto passed = pass(); !passed) return passed;
    }
    end_gather(conversion_, scratch_.gather, block_);
    return {};
  }

 private:
  std::pair<std::uint64_t, std::uint64_t> columns_of_light() const {
    std::uint64_t left = segments_.front().column, right = 0;
    for (const RowSegment& segment : segments_) {
      left = std::min<std::uint64_t>(left, segment.column);
      right = std::max<std::uint64_t>(right, segment.column + segment.count);
    }
    return {left, right};
  }

  Expected<void> pass() {
    if (map_.storage == Storage::contiguous) {
      return read_plain(map_.data_offset, Box{{0, 0, 0}, map_.shape});
    }
    const ChunkGrid grid(map_);
    return grid.for_each(wanted_, [&](std::size_t number, const Box& box) -> Expected<void> {
      const Chunk& chunk = map_.chunks[number];
      const std::uint32_t applied = (1U << map_.filters.size()) - 1;
      if (chunk.bytes == 0) return in_this_pass(box) ? fill(box) : Expected<void>{};
      if ((chunk.filter_mask & applied) == applied) return read_plain(chunk.offset, box);
      return in_this_pass(box) ? read_coded(chunk, box) : Expected<void>{};
    });
  }

  bool in_this_pass(const Box& box) const {
    return axes_.window(box).holds(segments_.front()) == pass_has_first_point_;
  }

  /// The points that fall into `box`, clipped into the scratch when they are not all.
  std::span<const RowSegment> points_in(const Box& box) {
    const GridWindow window = axes_.window(box);
    if (window.first_row == 0 && window.end_row >= map_.rows() && window.first_column == 0 &&
        window.end_column >= map_.columns()) {
      return segments_;
    }
    clip(segments_, window, scratch_.segments);
    return scratch_.segments;
  }

  /// Gathers from elements in memory: `held` is the box that `data` holds whole, `wanted` the part to take.
  void take(const std::byte* data,
            const Box& held,
            const Box& wanted,
            std::span<const RowSegment> points,
            const std::array<std::size_t, 3>& stride) {
    const std::size_t skipped = (wanted.first[axes_.frame] - held.first[axes_.frame]) * stride[axes_.frame];
    const Tile tile{.data = data + skipped * element_bytes_,
                    .frames = {wanted.first[axes_.frame] - range_.first, wanted.count[axes_.frame]},
                    .first_row = held.first[axes_.row],
                    .first_column = held.first[axes_.column],
                    .frame_stride = stride[axes_.frame],
                    .row_stride = stride[axes_.row],
                    .column_stride = stride[axes_.column]};
    gather(conversion_, tile, points, scratch_.gather, block_);
  }

  Expected<void> fill(const Box& box) {
    const Box wanted = common(box, wanted_);
    const auto points = points_in(box);
    if (wanted.is_empty() || points.empty()) return {};
    const std::vector<std::byte> element = stored_element(conversion_, map_.fill_value);
    take(element.data(), box, wanted, points, {0, 0, 0});
    return {};
  }

  Expected<void> read_coded(const Chunk& chunk, const Box& box) {
    const Box wanted = common(box, wanted_);
    const auto points = points_in(box);
    if (wanted.is_empty() || points.empty()) return {};
    scratch_.stored.resize(chunk.bytes);
    if (auto read = file_.read_at(chunk.offset, scratch_.stored); !read) return read;
    const ChunkCoding coding{
        .filters = map_.filters,
        .element_bytes = element_bytes_,
        .decoded_bytes =
            static_cast<std::size_t>(box.count[0] * box.count[1] * box.count[2]) * element_bytes_};
    const auto decoded = decode_chunk(coding, chunk.filter_mask, scratch_.stored, scratch_.decode);
    if (!decoded) return failure(decoded);
    if (decoded->is_shuffled) {
      take_shuffled(decoded->bytes, box, wanted, points);
    } else {
      take(decoded->bytes.data(), box, wanted, points, strides(box.count));
    }
    return {};
  }

  /// Unshuffles a few planes at a time, so that the elements are still in cache when they are gathered: with
  /// chunks of 4 MiB that is a sixth faster than doing the whole chunk first.
  void take_shuffled(std::span<const std::byte> shuffled,
                     const Box& held,
                     const Box& wanted,
                     std::span<const RowSegment> points) {
    const auto plane = static_cast<std::size_t>(held.count[1] * held.count[2]);
    const std::uint64_t planes =
        std::clamp<std::uint64_t>(unshuffled_bytes / (plane * element_bytes_), 1, wanted.count[0]);
    for (std::uint64_t i = wanted.first[0]; i < wanted.end(0); i += planes) {
      Box piece = held;
      piece.first[0] = i;
      piece.count[0] = std::min(planes, wanted.end(0) - i);
      scratch_.elements.resize(static_cast<std::size_t>(piece.count[0]) * plane * element_bytes_);
      unshuffle(shuffled, element_bytes_, static_cast<std::size_t>(i - held.first[0]) * plane,
                scratch_.elements);
      take(scratch_.elements.data(), piece, common(piece, wanted), points, strides(held.count));
    }
  }

  /// What is read of a box that lies plainly in the file: the wanted part, widened where skipping does not
  /// pay.
  Box worth_reading(const Box& held) const {
    Box box = common(held, wanted_);
    std::uint64_t inner_bytes = element_bytes_;
    for (std::size_t axis = 2; axis > 0; --axis) {
      inner_bytes *= held.count[axis];
      if (axis == axes_.frame || inner_bytes >= skippable_bytes) continue;
      box.first[axis] = held.first[axis];
      box.count[axis] = held.count[axis];
    }
    return box;
  }

  /// Reads a box of which every element lies in the file as it is, `offset` being that of its first.
  Expected<void> read_plain(std::uint64_t offset, const Box& held) {
    const Box wanted = worth_reading(held);
    if (wanted.is_empty()) return {};
    const std::uint64_t row_bytes = wanted.count[2] * element_bytes_;
    const std::uint64_t plane_bytes = wanted.count[1] * row_bytes;
    const std::uint64_t planes =
        std::clamp<std::uint64_t>(limits::read_piece_bytes / plane_bytes, 1, wanted.count[0]);
    const std::uint64_t rows =
        std::clamp<std::uint64_t>(limits::read_piece_bytes / row_bytes, 1, wanted.count[1]);
    for (std::uint64_t i = 0; i < wanted.count[0]; i += planes) {
      for (std::uint64_t j = 0; j < wanted.count[1]; j += rows) {
        const Box piece{
            {wanted.first[0] + i, wanted.first[1] + j, wanted.first[2]},
            {std::min(planes, wanted.count[0] - i), std::min(rows, wanted.count[1] - j), wanted.count[2]}};
        if (!in_this_pass(piece)) continue;
        if (auto read = read_piece(offset, held, piece); !read) return read;
      }
    }
    return {};
  }

  Expected<void> read_piece(std::uint64_t offset, const Box& held, const Box& piece) {
    const auto points = points_in(piece);
    if (points.empty()) return {};
    // What lies together in the file is read together: whole planes, whole rows, or parts of rows.
    const bool whole_rows = piece.count[2] == held.count[2];
    const bool whole_planes = whole_rows && piece.count[1] == held.count[1];
    const std::uint64_t planes_at_once = whole_planes ? piece.count[0] : 1;
    const std::uint64_t rows_at_once = whole_rows ? piece.count[1] : 1;
    const std::size_t stretch_bytes =
        static_cast<std::size_t>(planes_at_once * rows_at_once * piece.count[2]) * element_bytes_;
    const auto stride = strides(held.count);

    scratch_.stored.resize(static_cast<std::size_t>(piece.count[0] * piece.count[1] * piece.count[2]) *
                           element_bytes_);
    std::span<std::byte> rest = scratch_.stored;
    for (std::uint64_t i = 0; i < piece.count[0]; i += planes_at_once) {
      for (std::uint64_t j = 0; j < piece.count[1]; j += rows_at_once) {
        const std::uint64_t element = (piece.first[0] + i - held.first[0]) * stride[0] +
                                      (piece.first[1] + j - held.first[1]) * stride[1] +
                                      (piece.first[2] - held.first[2]);
        if (auto read = file_.read_at(offset + element * element_bytes_, rest.first(stretch_bytes)); !read) {
          return read;
        }
        rest = rest.subspan(stretch_bytes);
      }
    }
    take(scratch_.stored.data(), piece, common(piece, wanted_), points, strides(piece.count));
    return {};
  }

  const ReadFile& file_;
  const FrameMap& map_;
  const Axes axes_;
  const Conversion conversion_;
  const std::size_t element_bytes_;
  const optics::FrameRange range_;
  const std::vector<RowSegment> segments_;
  Box wanted_;  // the range, and the rectangle around the aperture
  bool pass_has_first_point_ = true;
  optics::FrameBlock& block_;
  FrameReader::Scratch& scratch_;
};

/// All points of a range of frames.
Box whole_frames(const FrameMap& map, optics::FrameRange range) {
  Box box{{0, 0, 0}, map.shape};
  const auto frame_axis = static_cast<std::size_t>(map.axes[0]);
  box.first[frame_axis] = range.first;
  box.count[frame_axis] = range.count;
  return box;
}

}  // namespace

FrameReader::FrameReader(std::unique_ptr<ReadFile> file, FrameMap map, FileStamp stamp)
    : file_(std::move(file)), map_(std::move(map)), stamp_(stamp) {}

Expected<FrameReader> FrameReader::open(const FileSystem& files,
                                        const std::filesystem::path& path,
                                        FrameMap map,
                                        const FileIdentity& identity) {
  auto file = files.open(path);
  if (!file) return failure(file);
  FrameReader reader(std::move(*file), std::move(map), identity.stamp);
  if (auto unchanged = reader.verify_unchanged(); !unchanged) {
    unchanged.error().subject = path.string();
    return failure(unchanged);
  }
  return reader;
}

std::size_t FrameReader::natural_frames() const {
  const auto frame_axis = static_cast<std::size_t>(map_.axes[0]);
  std::uint64_t natural = 1;
  if (map_.storage == Storage::chunked) {
    natural = map_.chunk_shape[frame_axis];
  } else {
    const std::uint64_t frame_bytes = map_.rows() * map_.columns() * element_bytes(map_.element);
    const std::size_t bytes = frame_axis == 0 ? limits::read_piece_bytes : transposed_block_bytes;
    natural = std::max<std::uint64_t>(1, bytes / frame_bytes);
  }
  return static_cast<std::size_t>(std::min(natural, map_.frames()));
}

std::uint64_t FrameReader::stored_bytes(optics::FrameRange range) const {
  if (range.count == 0) return 0;
  if (map_.storage == Storage::contiguous) {
    return range.count * map_.rows() * map_.columns() * element_bytes(map_.element);
  }
  std::uint64_t bytes = 0;
  const auto summed = ChunkGrid(map_).for_each(whole_frames(map_, range),
                                               [&](std::size_t number, const Box&) -> Expected<void> {
                                                 bytes += map_.chunks[number].bytes;
                                                 return {};
                                               });
  (void)summed;  // adding cannot fail
  return bytes;
}

std::size_t FrameReader::memory_bytes(std::size_t frames, std::size_t points) const {
  const std::size_t block =
      frames * (points * sizeof(float) + 2 * sizeof(double) + sizeof(std::uint32_t) + 1);
  std::size_t scratch = limits::read_piece_bytes;
  if (map_.storage == Storage::chunked && !map_.filters.empty()) {
    // The stored bytes, and two buffers for the filters to hand over.
    scratch = 3 * static_cast<std::size_t>(ChunkGrid(map_).elements()) * element_bytes(map_.element);
  }
  return block + scratch + points / 2 * sizeof(RowSegment);
}

Expected<void> FrameReader::read(optics::FrameRange range,
                                 const optics::Aperture& aperture,
                                 optics::FrameBlock& block,
                                 Scratch& scratch) const {
  if (range.first > frames() || range.count > frames() - range.first) {
    throw std::invalid_argument("FrameReader::read: the range leaves the file's frames");
  }
  if (aperture.rows() != map_.rows() || aperture.columns() != map_.columns() || aperture.points() == 0) {
    throw std::invalid_argument("FrameReader::read: the aperture lies on another grid than the frames");
  }
  auto filled = Filling(*file_, map_, range, aperture, block, scratch).run();
  if (!filled && filled.error().code == ErrorCode::damaged_file) {
    // A file that is being rewritten looks damaged: say which of the two it is.
    if (auto unchanged = verify_unchanged(); !unchanged) return unchanged;
  }
  return filled;
}

Expected<void> FrameReader::verify_unchanged() const {
  const auto stamp = file_->stamp();
  if (!stamp) return failure(stamp);
  if (*stamp != stamp_) {
    return failure(ErrorCode::file_changed, fmt::format("changed since it was indexed: {} bytes then, {} now",
                                                        stamp_.size_bytes, stamp->size_bytes));
  }
  return {};
}

}  // namespace bentlight::archive
