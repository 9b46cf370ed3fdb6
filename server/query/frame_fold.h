// Folding frames into a result: read in blocks on several lanes, accumulate block by block, merge in block order.
#pragma once

#include <algorithm>
#include <condition_variable>
#include <functional>
#include <map>
#include <mutex>
#include <optional>
#include <utility>
#include <vector>

#include "archive/frame_reader.h"
#include "base/error.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"
#include "query/work.h"

namespace bentlight::query {

/// `range` cut into blocks that start at multiples of `natural` frames, so that no chunk is decoded twice. A block
/// holds about 8 MiB of points: enough of them for every core, few enough that merging costs nothing.
std::vector<optics::FrameRange> blocks_of(optics::FrameRange range, std::size_t natural, std::size_t points);

/// Hands out parts in rising order of their index, whatever the order of their arrival: results must not depend on
/// which lane was faster. A lane that is far ahead waits, which bounds what is held.
///
///   threads  put and abandon from any lane
template <class Part>
class OrderedMerge {
 public:
  OrderedMerge(std::size_t held_at_most, std::function<void(Part&&)> merge)
      : held_at_most_(held_at_most), merge_(std::move(merge)) {}

  void put(std::size_t index, Part part) {
    std::unique_lock lock(mutex_);
    turn_.wait(lock, [&] { return abandoned_ || index < next_ + held_at_most_; });
    if (abandoned_) return;
    held_.emplace(index, std::move(part));
    for (auto at = held_.find(next_); at != held_.end(); at = held_.find(++next_)) {
      merge_(std::move(at->second));
      held_.erase(at);
    }
    turn_.notify_all();
  }

  /// Lets every waiting lane go; nothing is merged any more.
  void abandon() {
    const std::lock_guard lock(mutex_);
    abandoned_ = true;
    turn_.notify_all();
  }

 private:
  const std::size_t held_at_most_;
  const std::function<void(Part&&)> merge_;
  std::mutex mutex_;  // guards the members below
  std::condition_variable turn_;
  std::map<std::size_t, Part> held_;
  std::size_t next_ = 0;
  bool abandoned_ = false;
};

/// Reads the frames of `range` and folds them.
///
///   start()                       an empty Part, for a block
///   add(part, block, lane)        takes a piece of frames into a part; pieces of a block come in order, in one lane
///   merge(part)                   takes a finished part, in block order, one at a time
///
///   errors  those of the reader, those of add; file_changed when the file changed while it was read; cancelled
template <class Part, class Start, class Add, class Merge>
Expected<void> fold_frames(const archive::FrameReader& reader, optics::FrameRange range,
                           const optics::Aperture& aperture, Work& work, Start start, Add add, Merge merge) {
  struct Lane {
    optics::FrameBlock block;
    archive::FrameReader::Scratch scratch;
  };
  const std::size_t natural = reader.natural_frames();
  const auto blocks = blocks_of(range, natural, aperture.points());
  std::vector<Lane> lanes(work.pool.lanes());
  OrderedMerge<Part> ordered(2 * lanes.size(), merge);

  const auto fold_block = [&](std::size_t index, std::size_t lane_index) -> Expected<void> {
    Lane& lane = lanes[lane_index];
    Part part = start();
    const optics::FrameRange block = blocks[index];
    for (std::size_t first = block.first; first < block.end();) {
      const std::size_t end = std::min(block.end(), (first / natural + 1) * natural);
      const optics::FrameRange piece{first, end - first};
      if (auto read = reader.read(piece, aperture, lane.block, lane.scratch); !read) return read;
      work.progress.done += reader.stored_bytes(piece);
      if (auto added = add(part, lane.block, lane_index); !added) return added;
      first = end;
    }
    ordered.put(index, std::move(part));
    return {};
  };
  const auto guarded = [&](std::size_t index, std::size_t lane) -> Expected<void> {
    try {
      auto folded = fold_block(index, lane);
      if (!folded) ordered.abandon();
      return folded;
    } catch (...) {
      ordered.abandon();  // or the lanes ahead of this one would wait for ever
      throw;
    }
  };
  if (auto folded = work.pool.for_each(blocks.size(), work.stop, guarded); !folded) return folded;
  return reader.verify_unchanged();
}

}  // namespace bentlight::query
