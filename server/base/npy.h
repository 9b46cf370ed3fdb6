// NPY files: one array each, readable by NumPy and many others (NumPy Enhancement Proposal 1).
#pragma once

#include <cstddef>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace bentlight {

/// What the head of an NPY file says.
struct NpyHeader {
  std::string descr;               // "<f8"
  std::vector<std::size_t> shape;  // row-major
  std::size_t data_offset = 0;
};

struct NpyView {
  std::string descr;
  std::vector<std::size_t> shape;
  std::size_t data_offset = 0;
  std::span<const std::byte> data;
};

/// Bytes of an element of `descr` ("<f4", "|u1" …); 0 for one that is not known here.
std::size_t npy_element_bytes(std::string_view descr);

/// A whole file, version 1.0, row-major, data aligned to 64 bytes.
std::vector<std::byte> npy_image(std::string_view descr,
                                 std::span<const std::size_t> shape,
                                 std::span<const std::byte> data);

/// Reads the head from a file's first bytes (4096 are always enough for our own).
///
///   errors  damaged_file: not NPY, column-major, an element type that is not known, a shape that overflows
Expected<NpyHeader> parse_npy_header(std::span<const std::byte> start);

/// errors  as parse_npy_header; damaged_file when the data do not fill the shape exactly
Expected<NpyView> parse_npy(std::span<const std::byte> file);

}  // namespace bentlight
