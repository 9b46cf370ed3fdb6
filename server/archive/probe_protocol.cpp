#include "archive/probe_protocol.h"

#include <algorithm>
#include <cstdint>
#include <cstring>
#include <utility>

#include "archive/structure_codec.h"

namespace bentlight::archive {

namespace {

using nlohmann::json;

constexpr std::size_t length_bytes = sizeof(std::uint64_t);

std::vector<std::byte> reply_of(const json& header, std::span<const NamedArray> arrays = {}) {
  // Text out of a foreign file may be no UTF-8; JSON must be.
  const std::string text = header.dump(-1, ' ', false, json::error_handler_t::replace);
  const std::uint64_t length = text.size();
  std::vector<std::byte> reply(length_bytes + text.size());
  std::memcpy(reply.data(), &length, length_bytes);
  std::memcpy(reply.data() + length_bytes, text.data(), text.size());
  for (const NamedArray& array : arrays) reply.insert(reply.end(), array.bytes.begin(), array.bytes.end());
  return reply;
}

tl::unexpected<Error> no_reply() {
  return failure(ErrorCode::damaged_file, "the parser broke down on this file and gave no answer");
}

ErrorCode code_named(const std::string& text) {
  for (const ErrorCode code : all_error_codes()) {
    if (name(code) == text) return code;
  }
  return ErrorCode::damaged_file;
}

/// The header of a reply and the bytes behind it; an error that the probe reported becomes ours.
struct Opened {
  json header;
  std::span<const std::byte> rest;
};

Expected<Opened> opened(std::span<const std::byte> reply) {
  std::uint64_t length = 0;
  if (reply.size() < length_bytes) return no_reply();
  std::memcpy(&length, reply.data(), length_bytes);
  reply = reply.subspan(length_bytes);
  if (length > reply.size()) return no_reply();
  const auto* text = reinterpret_cast<const char*>(reply.data());
  json header = json::parse(text, text + length, nullptr, /*allow_exceptions=*/false);
  if (!header.is_object()) return no_reply();
  if (const auto error = header.find("error"); error != header.end()) {
    if (!error->is_object()) return no_reply();
    const auto word = [&](const char* key) {
      const auto found = error->find(key);
      return found != error->end() && found->is_string() ? found->get<std::string>() : std::string();
    };
    return failure(code_named(word("code")), word("text"), word("subject"));
  }
  return Opened{std::move(header), reply.subspan(static_cast<std::size_t>(length))};
}

bool is_array_header(const json& header) {
  const auto has = [&](const char* key, auto is) { return header.contains(key) && is(header[key]); };
  if (!header.is_object() || !has("name", [](const json& v) { return v.is_string(); }) ||
      !has("descr", [](const json& v) { return v.is_string(); }) ||
      !has("bytes", [](const json& v) { return v.is_number_unsigned(); }) ||
      !has("shape", [](const json& v) { return v.is_array(); })) {
    return false;
  }
  return std::ranges::all_of(header["shape"], [](const json& extent) { return extent.is_number_unsigned(); });
}

Expected<std::vector<NamedArray>> arrays_of(const Opened& reply) {
  std::vector<NamedArray> arrays;
  std::span<const std::byte> rest = reply.rest;
  const auto headers = reply.header.find("arrays");
  if (headers == reply.header.end() || !headers->is_array()) return no_reply();
  for (const json& header : *headers) {
    if (!is_array_header(header)) return no_reply();
    const auto bytes = header["bytes"].get<std::uint64_t>();
    if (bytes > rest.size()) return no_reply();
    const auto content = rest.first(static_cast<std::size_t>(bytes));
    arrays.push_back({header["name"].get<std::string>(),
                      header["descr"].get<std::string>(),
                      header["shape"].get<std::vector<std::size_t>>(),
                      {content.begin(), content.end()}});
    rest = rest.subspan(content.size());
  }
  return arrays;
}

}  // namespace

std::vector<std::byte> error_reply(const Error& error) {
  return reply_of(
      {{"error", {{"code", name(error.code)}, {"text", error.text}, {"subject", error.subject}}}});
}

std::vector<std::byte> tree_reply(const json& tree) {
  return reply_of({{"tree", tree}});
}

std::vector<std::byte> structure_reply(const WavefrontFile& file) {
  const TakenApart parts = take_apart(file);
  json arrays = json::array();
  for (const NamedArray& array : parts.arrays) {
    arrays.push_back({{"name", array.name},
                      {"descr", array.descr},
                      {"shape", array.shape},
                      {"bytes", array.bytes.size()}});
  }
  return reply_of({{"facts", parts.facts}, {"arrays", arrays}}, parts.arrays);
}

Expected<WavefrontFile> structure_from_reply(std::span<const std::byte> reply) {
  const auto header = opened(reply);
  if (!header) return failure(header);
  const auto arrays = arrays_of(*header);
  if (!arrays) return failure(arrays);
  const auto facts = header->header.find("facts");
  if (facts == header->header.end()) return no_reply();
  auto file = put_together(*facts, *arrays);
  if (!file) return no_reply();
  return file;
}

Expected<std::string> tree_from_reply(std::span<const std::byte> reply) {
  const auto header = opened(reply);
  if (!header) return failure(header);
  const auto tree = header->header.find("tree");
  if (tree == header->header.end()) return no_reply();
  return tree->dump(2);
}

}  // namespace bentlight::archive
