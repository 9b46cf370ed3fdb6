#include "archive/verify.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <functional>
#include <limits>

#include "base/limits.h"

namespace bentlight::archive {
namespace {

constexpr double nan = std::numeric_limits<double>::quiet_NaN();

/// Four frames of 3 x 2 in chunks of two frames, the last chunk ending with the file.
WavefrontFile sound_file() {
  WavefrontFile file;
  file.identity.stamp.size_bytes = 1000;
  file.map.shape = {4, 3, 2};
  file.map.storage = Storage::chunked;
  file.map.chunk_shape = {2, 3, 2};
  file.map.filters = {Filter::shuffle, Filter::deflate};
  file.map.chunks = {{100, 40, 0}, {940, 60, 0}};
  file.grid = {
      .rows = 3, .columns = 2, .x_m = {0.0, 0.1}, .y_m = {0.0, 0.1, 0.2}, .mask = {1, 1, 1, 1, 1, 1}};
  file.time_s = {0.0, 0.1, 0.1, 0.3};
  file.frame_rate_hz = 10.0;
  file.signals = {{"pressure", "Pa", {1.0F, 2.0F, 3.0F, 4.0F}}};
  return file;
}

struct Fault {
  const char* what;
  ErrorCode code;
  std::function<void(WavefrontFile&)> make;
};

constexpr std::uint64_t most = std::numeric_limits<std::uint64_t>::max();

const Fault faults[] = {
    {"axes twice", ErrorCode::layout_mismatch,
     [](auto& f) {
       f.map.axes = {0, 0, 1};
     }},
    {"an axis beyond", ErrorCode::layout_mismatch,
     [](auto& f) {
       f.map.axes = {0, 1, 3};
     }},
    {"no frames", ErrorCode::layout_mismatch, [](auto& f) { f.map.shape[0] = 0; }},
    {"too many points", ErrorCode::too_large,
     [](auto& f) {
       f.map.shape = {1, 1 << 20, 1 << 20};
     }},
    {"points that overflow", ErrorCode::too_large,
     [](auto& f) {
       f.map.shape = {1, most, most};
     }},
    {"bytes that overflow", ErrorCode::too_large,
     [](auto& f) {
       f.map.shape = {limits::frames, 4096, 4096};
     }},
    {"too many frames", ErrorCode::too_large, [](auto& f) { f.map.shape[0] = limits::frames + 1; }},
    {"far more than the file", ErrorCode::too_large, [](auto& f) { f.map.shape[0] = 1'000'000; }},
    {"a chunk of nothing", ErrorCode::damaged_file, [](auto& f) { f.map.chunk_shape[1] = 0; }},
    {"a chunk too large", ErrorCode::too_large,
     [](auto& f) {
       f.map.chunk_shape = {1 << 20, 1 << 5, 1 << 5};
     }},
    {"chunk bytes that overflow", ErrorCode::too_large,
     [](auto& f) {
       f.map.chunk_shape = {0xffffffff, 0xffffffff, 0xffffffff};
     }},
    {"a chunk missing from the table", ErrorCode::damaged_file, [](auto& f) { f.map.chunks.pop_back(); }},
    {"a chunk beyond the end", ErrorCode::damaged_file, [](auto& f) { f.map.chunks[1].bytes = 61; }},
    {"a chunk that wraps around", ErrorCode::damaged_file,
     [](auto& f) { f.map.chunks[1].offset = most - 10; }},
    {"a plain chunk of other size", ErrorCode::damaged_file,
     [](auto& f) { f.map.chunks[0].filter_mask = 3; }},
    {"a chunk far longer than its elements", ErrorCode::damaged_file,
     [](auto& f) {
       f.identity.stamp.size_bytes = 1'000'000;
       f.map.chunks[0].bytes = 500'000;
     }},
    {"deflated twice", ErrorCode::unsupported_storage,
     [](auto& f) {
       f.map.filters = {Filter::deflate, Filter::deflate};
     }},
    {"too many filters", ErrorCode::unsupported_storage,
     [](auto& f) { f.map.filters.assign(40, Filter::shuffle); }},
    {"scale zero", ErrorCode::layout_mismatch, [](auto& f) { f.map.scale = 0.0; }},
    {"scale not finite", ErrorCode::layout_mismatch, [](auto& f) { f.map.scale = nan; }},
    {"sign zero", ErrorCode::layout_mismatch, [](auto& f) { f.map.sign = 0; }},
    {"a fill value that is none", ErrorCode::damaged_file,
     [](auto& f) {
       f.map.element = ElementType::int16;
       f.map.fill_value = 40000.0;
     }},
    {"mask of another grid", ErrorCode::layout_mismatch, [](auto& f) { f.grid.mask.pop_back(); }},
    {"rows of another grid", ErrorCode::layout_mismatch, [](auto& f) { f.grid.rows = 2; }},
    {"x too short", ErrorCode::layout_mismatch, [](auto& f) { f.grid.x_m.pop_back(); }},
    {"y stands still", ErrorCode::layout_mismatch, [](auto& f) { f.grid.y_m[1] = 0.0; }},
    {"y not finite", ErrorCode::layout_mismatch, [](auto& f) { f.grid.y_m[0] = nan; }},
    {"time backwards", ErrorCode::layout_mismatch, [](auto& f) { f.time_s[2] = 0.05; }},
    {"time not finite", ErrorCode::layout_mismatch, [](auto& f) { f.time_s[3] = nan; }},
    {"time too short", ErrorCode::layout_mismatch, [](auto& f) { f.time_s.pop_back(); }},
    {"no frame rate", ErrorCode::layout_mismatch, [](auto& f) { f.frame_rate_hz = 0.0; }},
    {"frame rate not finite", ErrorCode::layout_mismatch, [](auto& f) { f.frame_rate_hz = nan; }},
    {"signal too short", ErrorCode::layout_mismatch, [](auto& f) { f.signals[0].values.pop_back(); }},
    {"contiguous beyond the end", ErrorCode::damaged_file,
     [](auto& f) {
       f.map.storage = Storage::contiguous;
       f.map.data_offset = 1000 - 4 * 3 * 2 * 4 + 1;
     }},
    {"contiguous that wraps around", ErrorCode::damaged_file,
     [](auto& f) {
       f.map.storage = Storage::contiguous;
       f.map.data_offset = most - 8;
     }},
};

TEST(Verify, AcceptsASoundFile) {
  EXPECT_TRUE(verify(sound_file()));
  WavefrontFile file = sound_file();
  file.map.storage = Storage::contiguous;
  file.map.data_offset = 1000 - 4 * 3 * 2 * 4;  // ends with the file
  EXPECT_TRUE(verify(file));
}

TEST(Verify, FindsEachFaultByItself) {
  for (const Fault& fault : faults) {
    WavefrontFile file = sound_file();
    fault.make(file);

    const auto verified = verify(file);

    ASSERT_FALSE(verified) << fault.what;
    EXPECT_EQ(verified.error().code, fault.code) << fault.what << ": " << verified.error().text;
    EXPECT_FALSE(verified.error().text.empty()) << fault.what;
  }
}

TEST(Verify, NamesTheFrameWhereTimeGoesBackwards) {
  WavefrontFile file = sound_file();
  file.time_s[2] = 0.05;

  EXPECT_THAT(verify(file).error().text, testing::HasSubstr("frame 2"));
}

}  // namespace
}  // namespace bentlight::archive
