// A WavefrontFile as facts (JSON) and arrays (bytes): the form in which the probe hands it over and in which
// it is kept.
#pragma once

#include <cstddef>
#include <nlohmann/json.hpp>
#include <span>
#include <string>
#include <vector>

#include "archive/wavefront_file.h"
#include "base/error.h"

namespace bentlight::archive {

/// A plain little-endian array. `descr` is its element type as NPY names it.
struct NamedArray {
  std::string name;
  std::string descr;
  std::vector<std::size_t> shape;
  std::vector<std::byte> bytes;
};

struct TakenApart {
  nlohmann::json facts;
  std::vector<NamedArray> arrays;
};

/// Arrays: "x", "y" <f8; "mask" |u1 [rows, columns]; "time" <f8 when known; "chunks" <u8 [chunks, 2] when
/// chunked, the second number being bytes + filter mask * 2^32; "signals" <f4 [signals, frames] when there
/// are any.
TakenApart take_apart(const WavefrontFile& file);

/// The inverse of take_apart; the numbers' sense is for verify() to judge.
///
///   errors  damaged_state when a fact or an array is missing or of another type
Expected<WavefrontFile> put_together(const nlohmann::json& facts, std::span<const NamedArray> arrays);

nlohmann::json to_json(const Layout& layout);
/// errors  damaged_state
Expected<Layout> layout_from_json(const nlohmann::json& json);

}  // namespace bentlight::archive
