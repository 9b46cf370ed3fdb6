#include "query/open_view.h"

#include "base/limits.h"
#include "base/sealed_folder.h"

namespace bentlight::query {

namespace {

// Views kept open, by the memory of their clocks, signals and points: a few hundred of the usual size.
constexpr std::size_t shelf_bytes = 256 * limits::mebi;

}  // namespace

Expected<archive::FrameReader> OpenView::frames() const {
  return archive::FrameReader::open(*files, path, file.map, file.identity);
}

std::size_t OpenView::memory_bytes() const {
  std::size_t bytes = sizeof(OpenView) + file.time_s.size() * sizeof(double) +
                      file.map.chunks.size() * sizeof(archive::Chunk) + native.points() * 2 * sizeof(double) +
                      file.grid.mask.size();
  for (const auto& signal : file.signals) bytes += signal.values.size() * sizeof(float);
  return bytes;
}

ViewShelf::ViewShelf(const FileSystem& files, const index::Index& index, std::filesystem::path archive,
                     std::filesystem::path state)
    : files_(files), index_(index), archive_(std::move(archive)), state_(std::move(state)) {}

Expected<std::shared_ptr<const OpenView>> ViewShelf::open(const std::string& id) {
  const auto record = index_.view(id);
  if (!record) return failure(record);
  {
    const std::lock_guard lock(mutex_);
    const auto found = by_id_.find(id);
    // The folder's name changes with each indexing: an open view of another one is of another state of the file.
    if (found != by_id_.end() && found->second->second->record.folder == record->folder &&
        found->second->second->record.state == record->state) {
      recent_.splice(recent_.begin(), recent_, found->second);
      return found->second->second;
    }
  }
  auto view = load(*record);
  if (view) keep(id, *view);
  return view;
}

Expected<std::shared_ptr<const OpenView>> ViewShelf::load(const index::ViewRecord& record) const {
  const auto folder = state_ / "views" / record.folder;
  const auto sealed = SealedFolder::open(files_, folder);
  if (!sealed) return failure(sealed);
  auto file = archive::load_wavefront_file(files_, folder);
  if (!file) return failure(file);
  auto summary = index::SummaryReader::open(*sealed);
  if (!summary) return failure(summary);
  auto mask = summary->mask();
  if (!mask) return failure(mask);
  file->grid.mask = std::move(*mask);
  auto native = optics::Aperture::of(file->grid);
  if (!native) return failure(native);
  return std::make_shared<const OpenView>(OpenView{.record = record,
                                                   .file = std::move(*file),
                                                   .native = std::move(*native),
                                                   .summary = std::move(*summary),
                                                   .path = archive_ / record.path,
                                                   .files = &files_});
}

void ViewShelf::keep(const std::string& id, std::shared_ptr<const OpenView> view) {
  const std::lock_guard lock(mutex_);
  if (const auto found = by_id_.find(id); found != by_id_.end()) {
    bytes_ -= found->second->second->memory_bytes();
    recent_.erase(found->second);
    by_id_.erase(found);
  }
  bytes_ += view->memory_bytes();
  recent_.emplace_front(id, std::move(view));
  by_id_.emplace(id, recent_.begin());
  while (bytes_ > shelf_bytes && recent_.size() > 1) {
    bytes_ -= recent_.back().second->memory_bytes();
    by_id_.erase(recent_.back().first);
    recent_.pop_back();
  }
}

}  // namespace bentlight::query
