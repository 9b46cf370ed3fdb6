#include "demo/demo_archive.h"

#include <fmt/format.h>

#include <algorithm>
#include <mutex>
#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <system_error>
#include <utility>
#include <vector>

#include "base/file.h"
#include "demo/expectation.h"
#include "demo/known_answers.h"
#include "demo/scenario.h"
#include "demo/shapes.h"
#include "demo/view_writer.h"

namespace bentlight::demo {

namespace {

namespace fs = std::filesystem;
constexpr std::size_t answers_limit_bytes = 64 << 20;  // two thousand views take four

Expected<void> check_range(const char* option,
                           std::uint64_t value,
                           std::uint64_t least,
                           std::uint64_t greatest) {
  if (value >= least && value <= greatest) return {};
  return failure(ErrorCode::bad_option,
                 fmt::format("--{} is {}; it goes from {} to {}", option, value, least, greatest), option);
}

Expected<void> check_options(const DemoOptions& options) {
  return check_range("views", options.views_per_run, 1, 2000)
      .and_then([&] { return check_range("frames", options.frames, 64, 10'000'000); })
      .and_then([&] { return check_range("grid", options.grid, 8, 512); });
}

std::string text_member(const nlohmann::json& json, const char* name) {
  const bool there = json.is_object() && json.contains(name) && json[name].is_string();
  return there ? json[name].get<std::string>() : std::string();
}

/// The files of an earlier demo archive in `folder`; nothing when the folder holds something else.
std::optional<std::vector<fs::path>> files_of_earlier_archive(const fs::path& folder) {
  const auto text = read_whole(PosixFileSystem(), folder / known_answers_file, answers_limit_bytes);
  if (!text) return std::nullopt;
  const auto answers = nlohmann::json::parse(*text, nullptr, /*allow_exceptions=*/false);
  if (text_member(answers, "generator") != generator_name) return std::nullopt;
  std::vector<fs::path> files;
  if (!answers.contains("views")) return files;
  for (const auto& view : answers["views"]) {
    const fs::path file = text_member(view, "file");
    // The list decides what is deleted, so it may name nothing outside its own campaign.
    const bool own = !file.empty() && file.lexically_normal() == file && *file.begin() == campaign_name;
    if (own && file.extension() == ".h5") files.push_back(folder / file);
  }
  return files;
}

/// Where the archive is going to be, and what of an earlier one lies there.
struct Site {
  fs::path folder;
  std::vector<fs::path> earlier;
};

/// Makes the folder if need be and looks into it: it must be empty, or hold an earlier demo archive.
Expected<Site> open_site(const fs::path& folder) {
  std::error_code error;
  fs::create_directories(folder, error);
  if (error) return system_failure(error.value(), "making the folder", folder.string());
  const bool empty = fs::is_empty(folder, error);
  if (error) return system_failure(error.value(), "looking into the folder", folder.string());
  if (empty) return Site{folder, {}};
  if (auto files = files_of_earlier_archive(folder)) return Site{folder, std::move(*files)};
  return failure(
      ErrorCode::bad_option,
      "the folder is not empty and holds no demo archive; nothing was written. Name another folder.",
      folder.string());
}

/// Free bytes, with those that the earlier archive is going to give back.
Expected<std::uint64_t> room_bytes(const Site& site) {
  std::error_code error;
  std::uint64_t room = fs::space(site.folder, error).available;
  if (error) return system_failure(error.value(), "asking for free space", site.folder.string());
  for (const fs::path& file : site.earlier) {
    const auto size = fs::file_size(file, error);
    if (!error) room += size;
  }
  return room;
}

Expected<void> check_room(const Site& site, std::uint64_t frame_bytes) {
  const auto room = room_bytes(site);
  if (!room) return failure(room);
  const std::uint64_t needed = frame_bytes + frame_bytes / 50 + (1 << 20);  // signals, times and headers
  if (*room >= needed) return {};
  return failure(
      ErrorCode::disk_full,
      fmt::format("the archive takes up to {:.2f} GB, but there is room for {:.2f} GB; nothing was written",
                  static_cast<double>(needed) * 1e-9, static_cast<double>(*room) * 1e-9),
      site.folder.string());
}

Expected<void> clear_earlier(const Site& site) {
  std::error_code error;
  for (const fs::path& file : site.earlier) {
    fs::remove(unfinished(file), error);
    if (!error) fs::remove(file, error);
    if (error) return system_failure(error.value(), "removing", file.string());
  }
  return {};
}

Expected<void> write_text(const fs::path& path, const std::string& text) {
  return PosixFileSystem().replace(path, as_bytes(text));
}

/// Counts what all threads have done and passes it on, one call at a time.
class ProgressCounter {
 public:
  ProgressCounter(const std::function<void(const DemoProgress&)>& listener, DemoProgress start)
      : listener_(listener), progress_(start) {}

  void add(std::uint64_t bytes, std::size_t files) {
    const std::lock_guard lock(mutex_);
    progress_.bytes_done += bytes;
    progress_.files_done += files;
    if (listener_) listener_(progress_);
  }

 private:
  const std::function<void(const DemoProgress&)>& listener_;
  std::mutex mutex_;  // guards the member below, and the listener against two calls at once
  DemoProgress progress_;
};

Expected<void> write_views(const fs::path& folder,
                           const Scenario& scenario,
                           const DemoGrid& grid,
                           const ExpectedStatistics& statistics,
                           WorkPool& pool,
                           ProgressCounter& progress,
                           const std::stop_token& stop) {
  return pool.for_each(scenario.views.size(), stop, [&](std::size_t index, std::size_t) -> Expected<void> {
    const View& view = scenario.views[index];
    const auto wrote = [&](std::uint64_t bytes) { progress.add(bytes, 0); };
    auto written = write_view(folder, scenario, grid, view, statistics.amplitudes(view), wrote, stop);
    if (written) progress.add(0, 1);
    return written;
  });
}

}  // namespace

std::uint64_t demo_frame_bytes(const DemoOptions& options) {
  return 2 * options.views_per_run * options.frames * options.grid * options.grid * sizeof(float);
}

Expected<DemoReport> write_demo_archive(const fs::path& folder,
                                        const DemoOptions& options,
                                        WorkPool& pool,
                                        const std::function<void(const DemoProgress&)>& progress,
                                        const std::stop_token& stop) {
  const std::uint64_t frame_bytes = demo_frame_bytes(options);
  auto ready =
      check_options(options).and_then([&] { return open_site(folder); }).and_then([&](const Site& site) {
        return check_room(site, frame_bytes).and_then([&] { return clear_earlier(site); });
      });
  if (!ready) return failure(ready);

  const Scenario scenario = make_scenario(options);
  const DemoGrid grid = make_grid(scenario);
  const ExpectedStatistics statistics(scenario, grid);
  ProgressCounter counter(progress, {.files_total = scenario.views.size(), .bytes_total = frame_bytes});
  // The answers come first: they do not depend on what is written, and mark the folder as ours if we are
  // interrupted.
  auto written =
      write_text(folder / known_answers_file, known_answers(scenario, grid, statistics).dump(1) + "\n")
          .and_then([&] { return write_text(folder / readme_file, readme(scenario)); })
          .and_then([&] { return write_views(folder, scenario, grid, statistics, pool, counter, stop); });
  if (!written) return failure(written);
  return DemoReport{.files = scenario.views.size(),
                    .frame_bytes = frame_bytes,
                    .known_answers = folder / known_answers_file};
}

}  // namespace bentlight::demo
