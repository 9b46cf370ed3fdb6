// The archive of make_archive.py, and files with chosen frames.
#pragma once

#include <fmt/format.h>

#include <cstdint>
#include <filesystem>
#include <stdexcept>
#include <vector>

#include "archive/hdf5_writer.h"
#include "support/command.h"
#include "support/temporary_folder.h"

namespace bentlight::test {

/// Written once; tests that change it take a copy.
inline const std::filesystem::path& small_archive() {
  static const TemporaryFolder folder;
  static const auto finished = testing_support::run(fmt::format(
      "/usr/bin/python3 {}/tests/support/make_archive.py '{}'", BENTLIGHT_SOURCE, folder.path().string()));
  if (finished.status != 0) throw std::runtime_error(finished.output);
  return folder.path();
}

/// A wavefront file of a square grid in the project's layout. opd_m [frames][across][across]
inline void write_wavefront_file(const std::filesystem::path& path,
                                 const std::vector<float>& opd_m,
                                 std::uint64_t across,
                                 const archive::DatasetStorage& storage = {}) {
  const std::uint64_t frames = opd_m.size() / (across * across);
  std::vector<double> place_m;
  for (std::uint64_t i = 0; i < across; ++i) place_m.push_back(0.01 * static_cast<double>(i));
  auto file = archive::Hdf5Writer::create(path).value();
  const std::uint64_t shape[] = {frames, across, across};
  bool is_good = file.begin<float>("/opd", shape, storage).has_value() &&
                 file.append<float>("/opd", 0, frames, opd_m).has_value() &&
                 file.attribute("/opd", "unit", "m").has_value();
  for (const char* axis : {"/x", "/y"})
    is_good &= file.dataset<double>(axis, {&across, 1}, place_m).has_value();
  is_good &= file.attribute("/", "frame_rate_hz", 1000.0).has_value() && file.close().has_value();
  if (!is_good) throw std::runtime_error("cannot write " + path.string());
}

}  // namespace bentlight::test
