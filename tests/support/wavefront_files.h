// The files of make_wavefront_files.py, written anew for each test that asks for them.
#pragma once

#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>
#include <stdexcept>
#include <string>
#include <vector>

#include "archive/wavefront_file.h"
#include "support/temporary_folder.h"

namespace bentlight::test {

/// One file of the manifest.
struct Specimen {
  std::string name;
  std::filesystem::path path;
  archive::Layout layout;
  std::string refused;  // the code, or empty when it is readable
  std::string says;
};

class WavefrontFiles {
 public:
  /// With names, only those; otherwise all.
  explicit WavefrontFiles(const std::vector<std::string>& names = {}) {
    std::string command = "/usr/bin/python3 " BENTLIGHT_SOURCE "/tests/support/make_wavefront_files.py '" +
                          folder_.path().string() + "'";
    for (const std::string& name : names) command += " " + name;
    if (std::system(command.c_str()) != 0) throw std::runtime_error("failed: " + command);
    std::ifstream stream(folder_.path() / "manifest.json");
    for (const auto& entry : nlohmann::json::parse(stream)) specimens_.push_back(specimen_of(entry));
    if (!names.empty() && specimens_.size() != names.size())
      throw std::runtime_error("not all written: " + command);
  }

  const std::filesystem::path& folder() const { return folder_.path(); }
  const std::vector<Specimen>& all() const { return specimens_; }

 private:
  Specimen specimen_of(const nlohmann::json& entry) const {
    Specimen specimen;
    specimen.name = entry.at("name");
    specimen.path = folder() / (specimen.name + ".h5");
    const auto& layout = entry.at("layout");
    if (layout.contains("axes")) specimen.layout.axes = layout["axes"].get<std::array<int, 3>>();
    if (layout.contains("unit")) specimen.layout.unit = layout["unit"].get<std::string>();
    if (layout.contains("sign")) specimen.layout.sign = layout["sign"].get<int>();
    specimen.layout.scale = layout.value("scale", 1.0);
    specimen.layout.offset = layout.value("offset", 0.0);
    if (!entry.at("refused").is_null()) specimen.refused = entry.at("refused");
    if (!entry.at("says").is_null()) specimen.says = entry.at("says");
    return specimen;
  }

  TemporaryFolder folder_;
  std::vector<Specimen> specimens_;
};

}  // namespace bentlight::test
