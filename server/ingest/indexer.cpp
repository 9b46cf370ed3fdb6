#include "ingest/indexer.h"

#include <algorithm>
#include <cmath>
#include <numeric>
#include <set>
#include <unordered_map>

#include <fmt/format.h>
#include <unistd.h>

#include "archive/frame_reader.h"
#include "base/limits.h"
#include "base/sealed_folder.h"
#include "base/text.h"
#include "index/summary_store.h"
#include "ingest/checks.h"
#include "ingest/native_aperture.h"
#include "ingest/summarize.h"

namespace bentlight::ingest {

namespace fs = std::filesystem;

namespace {

std::int64_t now_ms() {
  return std::chrono::duration_cast<std::chrono::milliseconds>(std::chrono::system_clock::now().time_since_epoch())
      .count();
}

/// Errors of the state folder or of the machine end the whole walk; all others are about one file.
bool ends_the_walk(ErrorCode code) {
  switch (code) {
    case ErrorCode::cancelled:
    case ErrorCode::disk_full:
    case ErrorCode::damaged_state:
    case ErrorCode::state_locked:
    case ErrorCode::internal:
      return true;
    default:
      return false;
  }
}

index::ViewRecord record_of(const archive::WavefrontFile& file, const fs::path& path) {
  const auto& conditions = file.conditions;
  const auto frames = static_cast<std::size_t>(file.map.frames());
  index::ViewRecord record{.path = path.string(),
                           .dataset = file.dataset,
                           .campaign_name = conditions.campaign,
                           .run_name = conditions.run,
                           .source = conditions.source,
                           .note = conditions.note,
                           .azimuth_deg = conditions.azimuth_deg,
                           .elevation_deg = conditions.elevation_deg,
                           .aperture_diameter_m = conditions.aperture_diameter_m,
                           .reference_length_m = conditions.reference_length_m,
                           .mach = conditions.mach,
                           .velocity_m_s = conditions.velocity_m_s,
                           .density_kg_m3 = conditions.density_kg_m3,
                           .temperature_k = conditions.temperature_k,
                           .wavelength_m = conditions.wavelength_m,
                           .gladstone_dale_m3_kg = conditions.gladstone_dale_m3_kg,
                           .frames = frames,
                           .rows = file.map.rows(),
                           .columns = file.map.columns(),
                           .frame_rate_hz = file.frame_rate_hz,
                           .duration_s = file.time_of(frames - 1) - file.time_of(0),
                           .start_s = file.time_of(0),
                           .stamp = file.identity.stamp,
                           .metadata_digest = file.identity.metadata_digest,
                           .state = "ready",
                           .indexed_at_ms = now_ms()};
  // A file that names neither campaign nor run is placed by its folders.
  if (record.run_name.empty()) record.run_name = path.parent_path().filename().string();
  if (record.run_name.empty()) record.run_name = "unnamed";
  if (record.campaign_name.empty()) record.campaign_name = path.begin()->string();
  if (record.campaign_name == path.filename().string()) record.campaign_name = "unnamed";
  return record;
}

/// The figures that lists show: OPD_rms with piston, tip, tilt and the steady lensing removed.
void add_figures(const index::SummaryData& summary, index::ViewRecord& record) {
  double sum = 0.0, squares = 0.0;
  std::size_t finite = 0;
  for (std::size_t t = 0; t < summary.frames; ++t) {
    if (!summary.finite[t]) continue;
    ++finite;
    squares += summary.tilt_removed_fluctuation[t];
    sum += std::sqrt(std::max(0.0, summary.tilt_removed_fluctuation[t]));
  }
  record.points = summary.points;
  record.finite_frames = finite;
  if (finite == 0) return;
  record.opd_rms_mean_m = sum / static_cast<double>(finite);
  record.opd_rms_overall_m = std::sqrt(squares / static_cast<double>(finite));
}

}  // namespace

Indexer::Indexer(IndexerParts parts, fs::path archive, fs::path state)
    : parts_(parts), archive_(std::move(archive)), state_(std::move(state)) {}

IndexProgress Indexer::progress() const {
  const std::lock_guard lock(mutex_);
  IndexProgress progress = progress_;
  progress.bytes_done = std::min(bytes_read_.load(), progress.bytes_total);
  const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - started_).count();
  if (progress.is_running && seconds > 0.0) progress.bytes_per_second = static_cast<double>(progress.bytes_done) / seconds;
  return progress;
}

void Indexer::note(const std::function<void(IndexProgress&)>& change) {
  const std::lock_guard lock(mutex_);
  change(progress_);
}

Expected<IndexProgress> Indexer::run(const std::stop_token& stop) {
  {
    const std::lock_guard lock(mutex_);
    progress_ = {.is_running = true};
    started_ = std::chrono::steady_clock::now();
    bytes_read_ = 0;
  }
  const auto walk = walk_archive(parts_.files, archive_);
  Expected<void> done = walk ? index_all(*walk, stop) : Expected<void>(failure(walk));
  if (done) done = mark_vanished(*walk);
  clean_up();
  note([&](IndexProgress& progress) {
    const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - started_).count();
    progress.bytes_per_second = seconds > 0 ? static_cast<double>(bytes_read_.load()) / seconds : 0.0;
    progress.is_running = false;
    progress.current.clear();
    if (!done) progress.error = done.error();
  });
  if (!done) return failure(done);
  return progress();
}

Expected<void> Indexer::index_all(const Walk& walk, const std::stop_token& stop) {
  const auto known = parts_.index.known_files();
  if (!known) return failure(known);
  std::unordered_map<std::string, FileStamp> unchanged;
  for (const auto& file : *known) {
    if (file.state != "missing") unchanged.emplace(file.path, file.stamp);
  }
  std::vector<const FoundFile*> to_read;
  std::uint64_t bytes = 0;
  for (const FoundFile& file : walk.files) {
    const auto found = unchanged.find(file.path.string());
    if (found != unchanged.end() && found->second == file.stamp) continue;
    to_read.push_back(&file);
    bytes += file.stamp.size_bytes;
  }
  note([&](IndexProgress& progress) {
    progress.files_total = walk.files.size();
    progress.unchanged = progress.files_done = walk.files.size() - to_read.size();
    progress.bytes_total = bytes;
  });
  for (const Error& error : walk.unreadable) {
    if (auto refused = refuse(error.subject, {}, error); !refused) return refused;
  }
  for (const FoundFile* file : to_read) {
    if (stop.stop_requested()) return failure(ErrorCode::cancelled, "indexing was stopped");
    note([&](IndexProgress& progress) { progress.current = file->path.string(); });
    if (auto indexed = index_one(*file, stop); !indexed) return indexed;
    note([](IndexProgress& progress) { ++progress.files_done; });
  }
  return {};
}

Expected<void> Indexer::index_one(const FoundFile& file, const std::stop_token& stop) {
  const auto record = read_view(file, stop);
  if (!record) {
    if (ends_the_walk(record.error().code)) return failure(record);
    return refuse(file.path.string(), file.stamp, record.error());
  }
  const auto kept = parts_.index.upsert_view(*record);
  if (!kept) return failure(kept);
  note([](IndexProgress& progress) { ++progress.indexed; });
  return {};
}

Expected<index::ViewRecord> Indexer::read_view(const FoundFile& found, const std::stop_token& stop) {
  const fs::path path = archive_ / found.path;
  auto file = parts_.probe.read_structure(parts_.files, path, archive::Layout{});
  if (!file) return failure(file);
  const auto reader = archive::FrameReader::open(parts_.files, path, file->map, file->identity);
  if (!reader) return failure(reader);
  auto grid = native_grid(*file, *reader);
  if (!grid) return failure(grid);
  file->grid = std::move(*grid);
  const auto aperture = optics::Aperture::of(file->grid);
  if (!aperture) return failure(aperture);
  const auto summary = summarize_view(*reader, file->grid, *aperture, {.retained_bytes = limits::index_memory_bytes},
                                      parts_.pool, stop, bytes_read_);
  if (!summary) return failure(summary);
  if (const auto same = reader->verify_unchanged(); !same) return failure(same);

  index::ViewRecord record = record_of(*file, found.path);
  add_figures(*summary, record);
  record.checks = checks_json(*file, *summary);
  record.folder = fmt::format("{:x}-{:x}-{:x}", now_ms(), ::getpid(), ++folders_made_);
  const fs::path staging = state_ / "staging" / record.folder;
  std::error_code error;
  fs::create_directories(staging, error);
  if (error) return system_failure(error.value(), "creating the folder", staging.string());
  // What is kept of a view appears under its name whole or not at all.
  SealedFolderWriter writer(parts_.files, staging);
  if (auto saved = archive::save_wavefront_file(parts_.files, staging, *file); !saved) return failure(saved);
  if (auto saved = index::save_summary(parts_.files, staging, *summary); !saved) return failure(saved);
  if (auto sealed = writer.seal(); !sealed) return failure(sealed);
  if (auto published = parts_.files.publish_folder(staging, state_ / "views" / record.folder); !published) {
    return failure(published);
  }
  return record;
}

Expected<void> Indexer::refuse(const std::string& path, const FileStamp& stamp, const Error& error) {
  parts_.log.warning("refused", {{"path", path}, {"code", std::string(name(error.code))}, {"text", error.text}});
  note([](IndexProgress& progress) { ++progress.refused; });
  return parts_.index.put_refusal({.path = path,
                                   .code = std::string(name(error.code)),
                                   .text = error.text,
                                   .refused_at_ms = now_ms(),
                                   .stamp = stamp});
}

Expected<void> Indexer::mark_vanished(const Walk& walk) {
  std::set<std::string> there;
  for (const FoundFile& file : walk.files) there.insert(file.path.string());
  // What lies below a folder that could not be read has not vanished; it cannot be seen.
  const auto is_hidden = [&](const std::string& path) {
    return std::ranges::any_of(walk.unreadable, [&](const Error& error) {
      return path == error.subject || path.starts_with(error.subject + "/");
    });
  };
  const auto known = parts_.index.known_files();
  if (!known) return failure(known);
  for (const auto& file : *known) {
    if (there.contains(file.path) || is_hidden(file.path) || file.state == "missing") continue;
    if (auto marked = parts_.index.mark_missing(file.path); !marked) return marked;
    note([](IndexProgress& progress) { ++progress.missing; });
  }
  return {};
}

void Indexer::clean_up() const {
  const auto folders = parts_.index.folders();
  if (!folders) return;  // without knowing what is in use nothing is removed
  const std::set<std::string> used(folders->begin(), folders->end());
  std::error_code ignored;  // a folder that cannot be removed now is tried again next time
  for (const auto& entry : fs::directory_iterator(state_ / "views", ignored)) {
    if (!used.contains(entry.path().filename().string())) fs::remove_all(entry.path(), ignored);
  }
  for (const auto& entry : fs::directory_iterator(state_ / "staging", ignored)) fs::remove_all(entry.path(), ignored);
}

}  // namespace bentlight::ingest
