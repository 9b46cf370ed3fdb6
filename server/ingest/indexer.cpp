#include "ingest/indexer.h"

#include <fmt/format.h>
#include <unistd.h>

#include <algorithm>
#include <cmath>
#include <numeric>
#include <set>
#include <unordered_map>

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
  return std::chrono::duration_cast<std::chrono::milliseconds>(
             std::chrono::system_clock::now().time_since_epoch())
      .count();
}

/// Whether the same file would be refused again: then it is not tried before it changes.
bool lasts(ErrorCode code) {
  switch (code) {
    case ErrorCode::not_hdf5:
    case ErrorCode::damaged_file:
    case ErrorCode::layout_mismatch:
    case ErrorCode::unsupported_storage:
    case ErrorCode::unsafe_file:
    case ErrorCode::too_large:
    case ErrorCode::degenerate_aperture:
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
  if (!progress.is_running) return progress;
  progress.bytes_done = std::min(progress.bytes_done + bytes_of_current_.load(), progress.bytes_total);
  progress.bytes_per_second = rate(progress.bytes_done);
  return progress;
}

double Indexer::rate(std::uint64_t bytes) const {
  const std::chrono::duration<double> elapsed = std::chrono::steady_clock::now() - started_;
  return elapsed.count() > 0.0 ? static_cast<double>(bytes) / elapsed.count() : 0.0;
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
    bytes_of_current_ = 0;
  }
  clean_up();  // what an earlier process left behind may fill the disk
  const auto walk = walk_archive(parts_.files, archive_);
  Expected<void> done = walk ? index_all(*walk, stop) : Expected<void>(failure(walk));
  if (done) done = mark_vanished(*walk);
  clean_up();
  note([&](IndexProgress& progress) {
    progress.bytes_per_second = rate(progress.bytes_done);
    progress.is_running = false;
    progress.current.clear();
    if (!done) progress.error = done.error();
  });
  if (!done) return failure(done);
  return progress();
}

Expected<std::vector<FoundFile>> Indexer::changed_files(const Walk& walk) {
  const auto known = parts_.index.known_files();
  if (!known) return failure(known);
  std::unordered_map<std::string, const index::KnownFile*> by_path;
  for (const auto& file : *known) by_path.emplace(file.path, &file);
  std::vector<FoundFile> changed;
  for (const FoundFile& file : walk.files) {
    const auto found = by_path.find(file.path.string());
    if (found == by_path.end() || found->second->stamp != file.stamp || !is_kept(*found->second)) {
      changed.push_back(file);
    } else if (found->second->state == "missing") {
      if (auto marked = parts_.index.mark_present(file.path.string()); !marked) return failure(marked);
    }
  }
  return changed;
}

/// After an unclean stop what is kept of each view is looked at, too: a power cut can undo what a disk
/// promised.
bool Indexer::is_kept(const index::KnownFile& file) const {
  if (file.state == "refused" || !parts_.index.was_left_uncleanly()) return true;
  return SealedFolder::open(parts_.files, state_ / "views" / file.folder).has_value();
}

Expected<void> Indexer::index_all(const Walk& walk, const std::stop_token& stop) {
  for (const Error& error : walk.unreadable) {
    if (auto refused = refuse(error.subject, {}, error); !refused) return refused;
  }
  const auto changed = changed_files(walk);
  if (!changed) return failure(changed);
  note([&](IndexProgress& progress) {
    progress.files_total = walk.files.size();
    progress.unchanged = progress.files_done = walk.files.size() - changed->size();
    for (const FoundFile& file : *changed) progress.bytes_total += file.stamp.size_bytes;
  });
  for (const FoundFile& file : *changed) {
    if (stop.stop_requested()) return failure(ErrorCode::cancelled, "indexing was stopped");
    note([&](IndexProgress& progress) { progress.current = file.path.string(); });
    if (auto indexed = index_one(file, stop); !indexed) return indexed;
    note([&](IndexProgress& progress) {
      ++progress.files_done;
      progress.bytes_done += file.stamp.size_bytes;
      bytes_of_current_ = 0;
    });
  }
  return {};
}

/// A stop and faults of the machine end the walk; everything else that reading a file meets is about that
/// file.
bool Indexer::ends_the_walk(const Error& error) const {
  return error.code == ErrorCode::cancelled || error.code == ErrorCode::internal ||
         error.code == ErrorCode::disk_full || error.subject.starts_with(state_.string());
}

Expected<void> Indexer::index_one(const FoundFile& file, const std::stop_token& stop) {
  const auto record = read_view(file, stop);
  if (!record) {
    if (ends_the_walk(record.error())) return failure(record);
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
  auto native = native_aperture(*file, *reader, parts_.pool, stop);
  if (!native) return failure(native);
  file->grid = std::move(native->grid);
  const auto aperture = optics::Aperture::of(file->grid);
  if (!aperture) return failure(aperture);

  // What is kept of a view appears under its name whole or not at all.
  const std::string folder = fmt::format("{:x}-{:x}-{:x}", now_ms(), ::getpid(), ++folders_made_);
  const fs::path staging = state_ / "staging" / folder;
  std::error_code error;
  fs::create_directories(staging, error);
  if (error) return system_failure(error.value(), "creating the folder", staging.string());
  const auto summary =
      summarize_view(*reader, file->grid, *aperture, parts_.files, staging,
                     {.retained_bytes = limits::index_memory_bytes}, parts_.pool, stop, bytes_of_current_);
  if (!summary) return failure(summary);
  if (const auto same = reader->verify_unchanged(); !same) return failure(same);
  if (auto saved = archive::save_wavefront_file(parts_.files, staging, *file); !saved) return failure(saved);
  if (auto sealed = SealedFolderWriter(parts_.files, staging).seal(); !sealed) return failure(sealed);
  if (auto published = parts_.files.publish_folder(staging, state_ / "views" / folder); !published) {
    return failure(published);
  }

  index::ViewRecord record = record_of(*file, found.path);
  add_figures(*summary, record);
  record.checks = checks_json(*file, *summary, native->dead_points);
  record.folder = folder;
  return record;
}

Expected<void> Indexer::refuse(const std::string& path, const FileStamp& stamp, const Error& error) {
  parts_.log.warning("refused",
                     {{"path", path}, {"code", std::string(name(error.code))}, {"text", error.text}});
  note([](IndexProgress& progress) { ++progress.refused; });
  return parts_.index.put_refusal({.path = path,
                                   .code = std::string(name(error.code)),
                                   .text = error.text,
                                   .refused_at_ms = now_ms(),
                                   .stamp = lasts(error.code) ? stamp : FileStamp{}});
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
  for (const auto& entry : fs::directory_iterator(state_ / "staging", ignored))
    fs::remove_all(entry.path(), ignored);
}

}  // namespace bentlight::ingest
