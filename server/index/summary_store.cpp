#include "index/summary_store.h"

#include <algorithm>
#include <array>
#include <bit>
#include <nlohmann/json.hpp>
#include <stdexcept>

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

/// Nodes of a tree over so many blocks. A node stands behind those that it was merged of, so that all nodes
/// of the first n blocks lie before the rest; there are n of level 0, n / 2 of level 1, and so on, which sums
/// to 2 n less the ones in n as a binary number.
std::size_t nodes_over(std::size_t blocks) {
  return 2 * blocks - static_cast<std::size_t>(std::popcount(blocks));
}

/// Where the node lies that holds the blocks from number * 2^level on.
std::size_t node_place(std::size_t level, std::size_t number) {
  const std::size_t last_block = ((number + 1) << level) - 1;
  return nodes_over(last_block) + level;
}

Expected<std::unique_ptr<NewFile>> start_maps(const FileSystem& files,
                                              const std::filesystem::path& path,
                                              std::size_t nodes,
                                              std::size_t points) {
  auto file = files.start(path);
  if (!file) return file;
  const std::array shape = {nodes, points};
  if (auto begun = (*file)->append(npy_image(descr_of<float>(), shape, {})); !begun) return failure(begun);
  return file;
}

}  // namespace

Expected<SummaryWriter> SummaryWriter::start(const FileSystem& files,
                                             std::filesystem::path folder,
                                             std::size_t points,
                                             std::size_t blocks) {
  SummaryWriter writer(files, std::move(folder), blocks);
  auto means = start_maps(files, writer.folder_ / "node_mean.npy", nodes_over(blocks), points);
  if (!means) return failure(means);
  auto m2s = start_maps(files, writer.folder_ / "node_m2.npy", nodes_over(blocks), points);
  if (!m2s) return failure(m2s);
  writer.means_ = std::move(*means);
  writer.m2s_ = std::move(*m2s);
  return writer;
}

Expected<void> SummaryWriter::add_node(const optics::MomentMaps& maps) {
  counts_.push_back(static_cast<std::int64_t>(maps.count));
  const std::vector<float> mean(maps.mean.begin(), maps.mean.end()), m2(maps.m2.begin(), maps.m2.end());
  if (auto added = means_->append(std::as_bytes(std::span(mean))); !added) return added;
  return m2s_->append(std::as_bytes(std::span(m2)));
}

Expected<void> SummaryWriter::add_block(optics::MomentMaps maps) {
  if (added_ == blocks_) throw std::invalid_argument("SummaryWriter: more blocks than were announced");
  if (auto added = add_node(maps); !added) return added;
  unpaired_.push_back(std::move(maps));
  ++added_;
  for (std::size_t left = added_; left % 2 == 0; left /= 2) {
    const optics::MomentMaps second = std::move(unpaired_.back());
    unpaired_.pop_back();
    unpaired_.back().merge(second);
    if (auto added = add_node(unpaired_.back()); !added) return added;
  }
  return {};
}

Expected<void> SummaryWriter::finish(const SummaryData& summary) {
  if (added_ != blocks_) throw std::invalid_argument("SummaryWriter: blocks are missing");
  const nlohmann::ordered_json shape = {{"version", summary_version},
                                        {"frames", summary.frames},
                                        {"points", summary.points},
                                        {"modes", summary.modes},
                                        {"rows", summary.rows},
                                        {"columns", summary.columns},
                                        {"block_frames", summary.block_frames},
                                        {"blocks", blocks_}};
  Expected<void> saved = files_->create(folder_ / "summary.json", as_bytes(shape.dump(2)));
  if (saved) saved = means_->finish();
  if (saved) saved = m2s_->finish();
  const auto save = [&](const std::string& name, std::initializer_list<std::size_t> extents,
                        const auto& data) {
    if (saved) saved = save_array(*files_, folder_, name, extents, data);
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
  save("node_count", {counts_.size()}, counts_);
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
  const std::size_t place = node_place(level, number);
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
  for (const std::size_t end = first + count; first < end;) {
    // The highest node that begins here and does not reach past the end.
    std::size_t level = 0;
    while (first % (std::size_t{2} << level) == 0 && first + (std::size_t{2} << level) <= end) ++level;
    const auto part = node(level, first >> level);
    if (!part) return failure(part);
    merged.merge(*part);
    first += std::size_t{1} << level;
  }
  return merged;
}

}  // namespace bentlight::index
