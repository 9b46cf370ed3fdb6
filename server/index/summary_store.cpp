#include "index/summary_store.h"

#include <algorithm>
#include <nlohmann/json.hpp>

#include "base/npy.h"

namespace bentlight::index {

namespace {

constexpr int summary_version = 1;

template <class Element>
constexpr std::string_view descr_of();
template <>
constexpr std::string_view descr_of<double>() {
  return "<f8";
}
template <>
constexpr std::string_view descr_of<float>() {
  return "<f4";
}
template <>
constexpr std::string_view descr_of<std::int64_t>() {
  return "<i8";
}
template <>
constexpr std::string_view descr_of<std::uint8_t>() {
  return "|u1";
}

// Our own files have short heads: magic, dictionary and padding are 128 bytes for every shape that occurs.
constexpr std::size_t head_bytes = 128;

template <class Element>
Expected<void> save_array(const FileSystem& files,
                          const std::filesystem::path& folder,
                          const std::string& name,
                          std::initializer_list<std::size_t> shape,
                          const std::vector<Element>& data) {
  const std::vector<std::size_t> extents(shape);
  return files.create(folder / (name + ".npy"),
                      npy_image(descr_of<Element>(), extents, std::as_bytes(std::span(data))));
}

/// How many nodes each level of the tree has: all blocks, then half of what is below, rounded up, until one
/// is left.
std::vector<std::size_t> level_sizes(std::size_t blocks) {
  std::vector<std::size_t> sizes = {blocks};
  while (sizes.back() > 1) sizes.push_back((sizes.back() + 1) / 2);
  return sizes;
}

struct Tree {
  std::vector<std::int64_t> count;  // [nodes]
  std::vector<float> mean, m2;      // [nodes][points]

  void add(const optics::MomentMaps& maps) {
    count.push_back(static_cast<std::int64_t>(maps.count));
    mean.insert(mean.end(), maps.mean.begin(), maps.mean.end());
    m2.insert(m2.end(), maps.m2.begin(), maps.m2.end());
  }
};

Tree tree_of(std::vector<optics::MomentMaps> level) {
  Tree tree;
  while (true) {
    for (const auto& maps : level) tree.add(maps);
    if (level.size() <= 1) return tree;
    std::vector<optics::MomentMaps> above;
    for (std::size_t i = 0; i < level.size(); i += 2) {
      above.push_back(std::move(level[i]));
      if (i + 1 < level.size()) above.back().merge(level[i + 1]);
    }
    level = std::move(above);
  }
}

}  // namespace

Expected<void> save_summary(const FileSystem& files,
                            const std::filesystem::path& folder,
                            const SummaryData& summary) {
  const nlohmann::ordered_json shape = {{"version", summary_version},
                                        {"frames", summary.frames},
                                        {"points", summary.points},
                                        {"modes", summary.modes},
                                        {"rows", summary.rows},
                                        {"columns", summary.columns},
                                        {"block_frames", summary.block_frames},
                                        {"blocks", summary.blocks.size()}};
  if (auto saved = files.create(folder / "summary.json", as_bytes(shape.dump(2))); !saved) return saved;
  const Tree tree = tree_of(summary.blocks);
  const std::size_t nodes = tree.count.size();
  Expected<void> saved;
  const auto save = [&](const std::string& name, std::initializer_list<std::size_t> extents,
                        const auto& data) {
    if (saved) saved = save_array(files, folder, name, extents, data);
  };
  save("coefficients", {summary.modes, summary.frames}, summary.coefficients);
  save("residual", {summary.frames}, summary.residual);
  save("residual_fluctuation", {summary.frames}, summary.residual_fluctuation);
  save("tilt_removed", {summary.frames}, summary.tilt_removed);
  save("tilt_removed_fluctuation", {summary.frames}, summary.tilt_removed_fluctuation);
  save("finite", {summary.frames}, summary.finite);
  save("mean_coefficients", {summary.modes}, summary.mean_coefficients);
  save("steady_lensing", {summary.points}, summary.steady_lensing);
  save("native_mask", {summary.rows, summary.columns}, summary.mask);
  save("node_count", {nodes}, tree.count);
  save("node_mean", {nodes, summary.points}, tree.mean);
  save("node_m2", {nodes, summary.points}, tree.m2);
  return saved;
}

Expected<SummaryReader> SummaryReader::open(std::shared_ptr<const SealedFolder> folder) {
  const auto text = folder->read_all("summary.json");
  if (!text) return failure(text);
  const auto* begin = reinterpret_cast<const char*>(text->data());
  const auto json = nlohmann::json::parse(begin, begin + text->size(), nullptr, false);
  if (!json.is_object() || json.value("version", 0) != summary_version) {
    return failure(ErrorCode::damaged_state, "a summary of another version; index the view anew",
                   "summary.json");
  }
  const Shape shape{.frames = json.value("frames", std::size_t{0}),
                    .points = json.value("points", std::size_t{0}),
                    .modes = json.value("modes", std::size_t{0}),
                    .block_frames = json.value("block_frames", std::size_t{0}),
                    .blocks = json.value("blocks", std::size_t{0}),
                    .rows = json.value("rows", std::size_t{0}),
                    .columns = json.value("columns", std::size_t{0})};
  if (shape.frames == 0 || shape.points == 0 || shape.modes < 3 || shape.block_frames == 0) {
    return failure(ErrorCode::damaged_state, "a summary without frames", "summary.json");
  }
  return SummaryReader(std::move(folder), shape);
}

template <class Element>
Expected<std::vector<Element>> SummaryReader::part(const std::string& name,
                                                   std::size_t first,
                                                   std::size_t count) const {
  std::vector<Element> values(count);
  const std::uint64_t offset = head_bytes + std::uint64_t{first} * sizeof(Element);
  if (auto read = folder_->read(name + ".npy", offset, std::as_writable_bytes(std::span(values))); !read) {
    return failure(read);
  }
  return values;
}

Expected<std::vector<double>> SummaryReader::coefficient(std::size_t k, optics::FrameRange range) const {
  return part<double>("coefficients", (k - 1) * shape_.frames + range.first, range.count);
}

Expected<std::vector<double>> SummaryReader::residual(optics::FrameRange range, bool fluctuation) const {
  return part<double>(fluctuation ? "residual_fluctuation" : "residual", range.first, range.count);
}

Expected<std::vector<double>> SummaryReader::tilt_removed(optics::FrameRange range, bool fluctuation) const {
  return part<double>(fluctuation ? "tilt_removed_fluctuation" : "tilt_removed", range.first, range.count);
}

Expected<std::vector<std::uint8_t>> SummaryReader::finite(optics::FrameRange range) const {
  return part<std::uint8_t>("finite", range.first, range.count);
}

Expected<std::vector<double>> SummaryReader::mean_coefficients() const {
  return part<double>("mean_coefficients", 0, shape_.modes);
}

Expected<std::vector<double>> SummaryReader::steady_lensing() const {
  return part<double>("steady_lensing", 0, shape_.points);
}

Expected<std::vector<std::uint8_t>> SummaryReader::mask() const {
  return part<std::uint8_t>("native_mask", 0, shape_.rows * shape_.columns);
}

Expected<optics::MomentMaps> SummaryReader::node(std::size_t level, std::size_t number) const {
  const auto sizes = level_sizes(shape_.blocks);
  std::size_t place = number;
  for (std::size_t below = 0; below < level; ++below) place += sizes[below];
  const auto count = part<std::int64_t>("node_count", place, 1);
  if (!count) return failure(count);
  const auto mean = part<float>("node_mean", place * shape_.points, shape_.points);
  if (!mean) return failure(mean);
  const auto m2 = part<float>("node_m2", place * shape_.points, shape_.points);
  if (!m2) return failure(m2);
  return optics::MomentMaps{.count = static_cast<std::size_t>(count->front()),
                            .mean = {mean->begin(), mean->end()},
                            .m2 = {m2->begin(), m2->end()}};
}

Expected<optics::MomentMaps> SummaryReader::maps(std::size_t first, std::size_t count) const {
  optics::MomentMaps merged = optics::MomentMaps::of(shape_.points);
  const std::size_t end = first + count;
  while (first < end) {
    // The highest node that begins here and does not reach past the end; the last of a level may be short.
    std::size_t level = 0, span = 1;
    while (first % (2 * span) == 0 && std::min(first + 2 * span, shape_.blocks) <= end &&
           span < shape_.blocks) {
      span *= 2;
      ++level;
    }
    const auto part = node(level, first / span);
    if (!part) return failure(part);
    merged.merge(*part);
    first = std::min(end, first + span);
  }
  return merged;
}

}  // namespace bentlight::index
