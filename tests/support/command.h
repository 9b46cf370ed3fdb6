// Running another program in a test, and what it printed.
#pragma once

#include <array>
#include <cstdio>
#include <string>

namespace bentlight::testing_support {

struct Finished {
  int status = 0;      // 0 when it went well
  std::string output;  // of both streams
};

/// Runs a line of shell.
inline Finished run(const std::string& command) {
  Finished finished;
  std::FILE* pipe = ::popen(("(" + command + ") 2>&1").c_str(), "r");
  if (pipe == nullptr) return {.status = -1, .output = "no shell"};
  std::array<char, 4096> piece{};
  while (const std::size_t count = std::fread(piece.data(), 1, piece.size(), pipe)) {
    finished.output.append(piece.data(), count);
  }
  finished.status = ::pclose(pipe);
  return finished;
}

}  // namespace bentlight::testing_support
