#include "base/npy.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <cstring>

#include "base/text.h"

namespace bentlight {

namespace {

constexpr std::array<unsigned char, 6> magic = {0x93, 'N', 'U', 'M', 'P', 'Y'};

tl::unexpected<Error> damaged(std::string text) {
  return failure(ErrorCode::damaged_file, "NPY: " + std::move(text));
}

/// The text after 'name': in the head's dictionary, blanks skipped.
std::string_view entry(std::string_view dictionary, std::string_view name) {
  const auto at = dictionary.find(fmt::format("'{}':", name));
  if (at == std::string_view::npos) return {};
  std::string_view rest = dictionary.substr(at + name.size() + 3);
  while (rest.starts_with(' ')) rest.remove_prefix(1);
  return rest;
}

Expected<std::vector<std::size_t>> parse_shape(std::string_view text) {
  const auto end = text.find(')');
  if (!text.starts_with('(') || end == std::string_view::npos) return damaged("the shape is not a tuple");
  std::vector<std::size_t> shape;
  std::size_t count = 1;
  for (std::string part : split(text.substr(1, end - 1), ',')) {
    std::erase(part, ' ');
    if (part.empty()) continue;
    const auto extent = parse_whole_number(part);
    if (!extent || *extent < 0) return damaged("the shape holds something else than extents");
    shape.push_back(static_cast<std::size_t>(*extent));
    if (__builtin_mul_overflow(count, std::max<std::size_t>(1, shape.back()), &count))
      return damaged("the shape overflows");
  }
  return shape;
}

}  // namespace

std::size_t npy_element_bytes(std::string_view descr) {
  constexpr std::array<std::pair<std::string_view, std::size_t>, 10> known = {{{"<f8", 8},
                                                                               {"<f4", 4},
                                                                               {"<i8", 8},
                                                                               {"<u8", 8},
                                                                               {"<i4", 4},
                                                                               {"<u4", 4},
                                                                               {"|u1", 1},
                                                                               {"|i1", 1},
                                                                               {"|b1", 1},
                                                                               {"<i2", 2}}};
  const auto found = std::ranges::find(known, descr, &std::pair<std::string_view, std::size_t>::first);
  return found == known.end() ? 0 : found->second;
}

std::vector<std::byte> npy_image(std::string_view descr,
                                 std::span<const std::size_t> shape,
                                 std::span<const std::byte> data) {
  std::string extents;
  for (const std::size_t extent : shape) extents += fmt::format("{}, ", extent);
  if (shape.size() > 1) extents.resize(extents.size() - 2);
  if (shape.size() == 1) extents.pop_back();
  std::string head =
      fmt::format("{{'descr': '{}', 'fortran_order': False, 'shape': ({}), }}", descr, extents);
  constexpr std::size_t fixed = magic.size() + 2 + 2;
  const std::size_t padded = (fixed + head.size() + 1 + 63) / 64 * 64;
  head.resize(padded - fixed - 1, ' ');
  head += '\n';
  std::vector<std::byte> image(padded + data.size());
  std::memcpy(image.data(), magic.data(), magic.size());
  image[6] = std::byte{1};
  image[7] = std::byte{0};
  image[8] = static_cast<std::byte>(head.size() & 0xFF);
  image[9] = static_cast<std::byte>(head.size() >> 8);
  std::memcpy(image.data() + fixed, head.data(), head.size());
  if (!data.empty()) std::memcpy(image.data() + padded, data.data(), data.size());
  return image;
}

Expected<NpyHeader> parse_npy_header(std::span<const std::byte> start) {
  if (start.size() < 12 || std::memcmp(start.data(), magic.data(), magic.size()) != 0)
    return damaged("no such file");
  const auto byte = [&](std::size_t i) { return std::to_integer<std::size_t>(start[i]); };
  const bool is_long = byte(6) >= 2;
  const std::size_t fixed = is_long ? 12 : 10;
  const std::size_t length = byte(8) | byte(9) << 8 | (is_long ? byte(10) << 16 | byte(11) << 24 : 0);
  if (length > start.size() - fixed) return damaged("the head is cut off");
  const std::string_view dictionary(reinterpret_cast<const char*>(start.data()) + fixed, length);
  const std::string_view descr = entry(dictionary, "descr");
  if (descr.size() < 5 || descr.front() != '\'') return damaged("no element type");
  NpyHeader header{.descr = std::string(descr.substr(1, 3)), .data_offset = fixed + length};
  if (descr[4] != '\'' || npy_element_bytes(header.descr) == 0)
    return damaged("an element type that is not read here");
  if (!entry(dictionary, "fortran_order").starts_with("False")) return damaged("column-major data");
  auto shape = parse_shape(entry(dictionary, "shape"));
  if (!shape) return failure(shape);
  header.shape = std::move(*shape);
  return header;
}

Expected<NpyView> parse_npy(std::span<const std::byte> file) {
  auto header = parse_npy_header(file);
  if (!header) return failure(header);
  std::size_t bytes = npy_element_bytes(header->descr);
  for (const std::size_t extent : header->shape) {
    if (__builtin_mul_overflow(bytes, extent, &bytes)) return damaged("the shape overflows");
  }
  const auto data = file.subspan(header->data_offset);
  if (data.size() != bytes)
    return damaged(fmt::format("{} bytes of data where the shape has {}", data.size(), bytes));
  return NpyView{std::move(header->descr), std::move(header->shape), header->data_offset, data};
}

}  // namespace bentlight
