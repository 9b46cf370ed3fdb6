// What NumPy saved as float64 or float32, for comparison; reads the header by its words, which is enough for
// files of our own scripts.
#pragma once

#include <cstdlib>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <stdexcept>
#include <string>
#include <vector>

namespace bentlight::test {

struct NpyValues {
  std::vector<std::size_t> shape;
  std::vector<double> values;  // row-major
};

template <class Element>
std::vector<double> widened(const std::string& bytes) {
  std::vector<Element> elements(bytes.size() / sizeof(Element));
  std::memcpy(elements.data(), bytes.data(), elements.size() * sizeof(Element));
  return {elements.begin(), elements.end()};
}

inline NpyValues load_npy(const std::filesystem::path& path) {
  std::ifstream stream(path, std::ios::binary);
  const std::string bytes{std::istreambuf_iterator<char>(stream), {}};
  if (bytes.substr(0, 6) != "\x93NUMPY") throw std::runtime_error(path.string() + " is no NPY file");
  const std::size_t header_bytes =
      static_cast<unsigned char>(bytes[8]) + 256U * static_cast<unsigned char>(bytes[9]);
  const std::string header = bytes.substr(10, header_bytes);
  const std::string content = bytes.substr(10 + header_bytes);

  NpyValues loaded;
  const char* at = header.c_str() + header.find('(') + 1;
  while (*at != ')' && *at != '\0') {
    char* end = nullptr;
    const auto extent = std::strtoull(at, &end, 10);
    if (end == at) {
      ++at;
    } else {
      loaded.shape.push_back(extent);
      at = end;
    }
  }
  loaded.values =
      header.find("<f8") != std::string::npos ? widened<double>(content) : widened<float>(content);
  return loaded;
}

}  // namespace bentlight::test
