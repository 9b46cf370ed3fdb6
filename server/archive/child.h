// A child process whose output is wanted, within limits of time and size.
#pragma once

#include <chrono>
#include <cstddef>
#include <filesystem>
#include <string>
#include <vector>

#include "base/error.h"

namespace bentlight::archive {

struct ChildTask {
  std::filesystem::path program;
  std::vector<std::string> arguments;  // without the program's name
  int file_descriptor = -1;            // handed over as `file_descriptor_there`
  int file_descriptor_there = 3;
  std::chrono::milliseconds time_limit{};
  std::size_t output_limit_bytes = 0;
};

/// How a child came to its end.
struct ChildEnd {
  std::vector<std::byte> output;
  int signal = 0;  // that killed it, or 0
  int exit_code = 0;
  bool out_of_time = false;    // killed by us
  bool out_of_output = false;  // killed by us
};

/// Runs a program to its end. It gets one descriptor of ours and of the environment the library path; it has
/// nothing to read, and its standard error is dropped.
///
///   errors  io_error and others of the operating system when it cannot be started
///   threads safe from any thread
Expected<ChildEnd> run_child(const ChildTask& task);

}  // namespace bentlight::archive
