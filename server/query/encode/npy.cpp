// NPY: one array as NumPy, Octave's packages and many others read it. Floats stay four bytes.
#include "base/npy.h"

#include <fmt/format.h>
#include <fmt/ranges.h>

#include <algorithm>

#include "query/encode/encoding.h"

namespace bentlight::query {

namespace {

/// The array that is meant when none is named: the only one that is no axis of another.
Expected<const Array*> only_array(const Result& result) {
  std::vector<std::string> names;
  std::vector<const Array*> candidates;
  for (const Array& array : result.arrays) {
    names.push_back(array.name);
    if (!is_axis(result, array)) candidates.push_back(&array);
  }
  if (candidates.size() == 1) return candidates.front();
  if (names.empty()) {
    return failure(ErrorCode::unsupported_encoding,
                   "this result has no arrays, so there is nothing to give as npy", "format",
                   {"json", "csv", "hdf5"});
  }
  return failure(ErrorCode::unsupported_encoding,
                 fmt::format("npy holds one array; choose by array= one of {}", fmt::join(names, ", ")),
                 "array", names);
}

Expected<const Array*> chosen_array(const Result& result, const std::string& name) {
  if (name.empty()) return only_array(result);
  const Array* array = result.array(name);
  if (array == nullptr) return no_such_array(result, name);
  return array;
}

}  // namespace

Expected<std::string> encode_npy(const Result& result, const std::string& name) {
  const auto array = chosen_array(result, name);
  if (!array) return failure(array);
  const auto image = std::visit(
      [&](const auto& data) {
        const bool is_float = sizeof(data.front()) == sizeof(float);
        return npy_image(is_float ? "<f4" : "<f8", (*array)->shape, std::as_bytes(std::span(data)));
      },
      (*array)->data);
  return std::string(reinterpret_cast<const char*>(image.data()), image.size());
}

}  // namespace bentlight::query
