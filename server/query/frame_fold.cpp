#include "query/frame_fold.h"

#include "base/limits.h"

namespace bentlight::query {

std::vector<optics::FrameRange> blocks_of(optics::FrameRange range, std::size_t natural, std::size_t points) {
  constexpr std::size_t block_bytes = 8 * limits::mebi;
  const std::size_t wanted = std::max<std::size_t>(1, block_bytes / (points * sizeof(float)));
  const std::size_t length = std::max(natural, wanted / natural * natural);
  std::vector<optics::FrameRange> blocks;
  for (std::size_t first = range.first; first < range.end();) {
    const std::size_t end = std::min(range.end(), (first / length + 1) * length);
    blocks.push_back({first, end - first});
    first = end;
  }
  return blocks;
}

}  // namespace bentlight::query
