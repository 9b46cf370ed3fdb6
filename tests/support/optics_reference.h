// What NumPy and SciPy say: runs tests/reference/optics_reference.py on given numbers.
#pragma once

#include <fstream>
#include <nlohmann/json.hpp>
#include <span>
#include <stdexcept>
#include <string>
#include <vector>

#include "support/command.h"
#include "support/temporary_folder.h"

namespace bentlight::test {

inline nlohmann::json optics_reference(const std::string& arguments) {
  const auto finished = testing_support::run(
      "/usr/bin/python3 " BENTLIGHT_SOURCE "/tests/reference/optics_reference.py " + arguments);
  if (finished.status != 0) throw std::runtime_error("optics_reference.py: " + finished.output);
  return nlohmann::json::parse(finished.output);
}

/// `command` on a file of `numbers`.
inline nlohmann::json optics_reference_of(const std::string& command,
                                          std::span<const double> numbers,
                                          const std::string& more = "") {
  const TemporaryFolder folder;
  const auto path = folder.path() / "numbers.f64";
  std::ofstream stream(path, std::ios::binary);
  stream.write(reinterpret_cast<const char*>(numbers.data()),
               static_cast<std::streamsize>(numbers.size_bytes()));
  stream.close();
  return optics_reference(command + " " + path.string() + " " + more);
}

}  // namespace bentlight::test
