// A view made ready for questions: its record, structure, aperture and summary, all of one state of its file.
#pragma once

#include <filesystem>
#include <list>
#include <memory>
#include <mutex>
#include <string>
#include <unordered_map>

#include "archive/frame_reader.h"
#include "archive/wavefront_file.h"
#include "base/error.h"
#include "base/file.h"
#include "index/index.h"
#include "index/summary_store.h"
#include "optics/aperture.h"

namespace bentlight::query {

/// Immutable once opened; shared by the questions that are about it.
struct OpenView {
  index::ViewRecord record;
  archive::WavefrontFile file;  // grid.mask is the native mask, NaN outside the light taken into account
  optics::Aperture native;
  index::SummaryReader summary;
  std::filesystem::path path;
  const FileSystem* files = nullptr;

  /// errors  as FrameReader::open
  Expected<archive::FrameReader> frames() const;
  std::size_t memory_bytes() const;
};

/// Keeps the views asked for lately open.
///
///   threads  safe from any thread
class ViewShelf {
 public:
  ViewShelf(const FileSystem& files, const index::Index& index, std::filesystem::path archive,
            std::filesystem::path state);

  /// errors  unknown_view, damaged_state, not_indexed; file_missing when the view's file is gone
  Expected<std::shared_ptr<const OpenView>> open(const std::string& id);

 private:
  Expected<std::shared_ptr<const OpenView>> load(const index::ViewRecord& record) const;
  void keep(const std::string& id, std::shared_ptr<const OpenView> view);

  const FileSystem& files_;
  const index::Index& index_;
  const std::filesystem::path archive_;
  const std::filesystem::path state_;

  std::mutex mutex_;  // guards the members below
  std::list<std::pair<std::string, std::shared_ptr<const OpenView>>> recent_;  // latest first
  std::unordered_map<std::string, decltype(recent_)::iterator> by_id_;
  std::size_t bytes_ = 0;
};

}  // namespace bentlight::query
