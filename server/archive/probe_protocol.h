// What the service and the probe say to one another.
//
// The question is on the probe's command line: `structure LAYOUT` with the layout as JSON, or `describe`. The
// file is descriptor 3, the answer goes to descriptor 1: eight bytes with the length of a JSON header
// (little-endian), the header, and after it the arrays that the header names, back to back. The header is
// {"error": …}, {"tree": …}, or
// {"facts": …, "arrays": [{"name", "descr", "shape", "bytes"}]}.
#pragma once

#include <cstddef>
#include <nlohmann/json.hpp>
#include <span>
#include <string>
#include <vector>

#include "archive/wavefront_file.h"
#include "base/error.h"

namespace bentlight::archive {

inline constexpr int probe_output_descriptor = 1;
inline constexpr int probe_file_descriptor = 3;

/// Exit codes by which the probe says that the installation is at fault, not the file. With any other but 0
/// the file has brought the parser down.
namespace probe_exit {
inline constexpr int no_file = 40;
inline constexpr int no_library = 41;
inline constexpr int no_cage = 42;
inline constexpr int not_started = 127;  // posix_spawn's
}  // namespace probe_exit

std::vector<std::byte> error_reply(const Error& error);
std::vector<std::byte> tree_reply(const nlohmann::json& tree);
std::vector<std::byte> structure_reply(const WavefrontFile& file);

/// errors  the error that the probe reported; damaged_file when the bytes are no reply, as those of a process
/// that a
///         hostile file has taken over may be
Expected<WavefrontFile> structure_from_reply(std::span<const std::byte> reply);
Expected<std::string> tree_from_reply(std::span<const std::byte> reply);

}  // namespace bentlight::archive
