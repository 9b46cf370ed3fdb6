#include "archive/wavefront_file.h"

#include <fmt/format.h>

#include <cstdint>
#include <nlohmann/json.hpp>
#include <string>
#include <utility>

#include "archive/structure_codec.h"
#include "archive/verify.h"
#include "base/digest.h"
#include "base/limits.h"
#include "base/npy.h"

namespace bentlight::archive {

namespace {

using nlohmann::json;

constexpr const char* facts_name = "wavefront_file.json";
constexpr int version = 1;
constexpr std::size_t facts_limit_bytes = 16 * limits::mebi;

// Text that is no UTF-8 is replaced, for JSON can be nothing else.
std::string dumped(const json& value, int indent = -1) {
  return value.dump(indent, ' ', false, json::error_handler_t::replace);
}

std::string checksum_text(std::span<const std::byte> bytes) {
  return fmt::format("{:016x}", checksum(bytes));
}

Expected<NamedArray> load_array(const FileSystem& files,
                                const std::filesystem::path& folder,
                                const json& header) {
  NamedArray array;
  array.name = header.at("name").get<std::string>();
  const auto image = read_whole(files, folder / (array.name + ".npy"), limits::probe_reply_bytes);
  if (!image) return failure(image);
  if (checksum_text(as_bytes(*image)) != header.at("checksum").get<std::string>()) {
    return failure(ErrorCode::damaged_state, fmt::format("{}.npy is torn: its checksum differs", array.name));
  }
  const auto view = parse_npy(as_bytes(*image));
  if (!view) return failure(view);
  array.descr = view->descr;
  array.shape.assign(view->shape.begin(), view->shape.end());
  array.bytes.assign(view->data.begin(), view->data.end());
  return array;
}

/// The file's content once its own checksum holds. throws json::exception when parts are missing
Expected<json> checked_body(const std::string& text) {
  json document = json::parse(text);
  if (document.at("version").get<int>() != version) {
    return failure(ErrorCode::damaged_state, fmt::format("{} is of another version", facts_name));
  }
  json body = std::move(document.at("body"));
  if (checksum_text(as_bytes(dumped(body))) != document.at("checksum").get<std::string>()) {
    return failure(ErrorCode::damaged_state, fmt::format("{} is torn: its checksum differs", facts_name));
  }
  return body;
}

Expected<WavefrontFile> load(const FileSystem& files, const std::filesystem::path& folder) {
  const auto text = read_whole(files, folder / facts_name, facts_limit_bytes);
  if (!text) return failure(text);
  const auto body = checked_body(*text);
  if (!body) return failure(body);
  std::vector<NamedArray> arrays;
  for (const json& header : body->at("arrays")) {
    auto array = load_array(files, folder, header);
    if (!array) return failure(array);
    arrays.push_back(std::move(*array));
  }
  auto file = put_together(body->at("facts"), arrays);
  if (!file) return file;
  if (auto verified = verify(*file); !verified) return failure(verified);
  return file;
}

}  // namespace

Expected<void> save_wavefront_file(const FileSystem& files,
                                   const std::filesystem::path& folder,
                                   const WavefrontFile& file) {
  const TakenApart parts = take_apart(file);
  json arrays = json::array();
  for (const NamedArray& array : parts.arrays) {
    const std::vector<std::byte> image = npy_image(array.descr, array.shape, array.bytes);
    arrays.push_back({{"name", array.name}, {"checksum", checksum_text(image)}});
    if (auto created = files.create(folder / (array.name + ".npy"), image); !created) return created;
  }
  const json body = {{"facts", parts.facts}, {"arrays", arrays}};
  const json document = {
      {"version", version}, {"checksum", checksum_text(as_bytes(dumped(body)))}, {"body", body}};
  return files.create(folder / facts_name, as_bytes(dumped(document, 1)));
}

Expected<WavefrontFile> load_wavefront_file(const FileSystem& files, const std::filesystem::path& folder) {
  try {
    auto file = load(files, folder);
    // Whatever is amiss with a file of our own, it is the state that must be made anew.
    if (!file && file.error().code != ErrorCode::io_error &&
        file.error().code != ErrorCode::permission_denied) {
      return failure(ErrorCode::damaged_state, file.error().text, folder.string());
    }
    return file;
  } catch (const json::exception& fault) {
    return failure(ErrorCode::damaged_state, fmt::format("{}: {}", facts_name, fault.what()),
                   folder.string());
  }
}

}  // namespace bentlight::archive
