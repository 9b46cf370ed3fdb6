#include "query/result.h"

#include <algorithm>
#include <span>

namespace bentlight::query {

namespace {

template <class Item>
const Item* named(const std::vector<Item>& items, std::string_view name) {
  const auto found = std::ranges::find(items, name, &Item::name);
  return found == items.end() ? nullptr : &*found;
}

std::size_t bytes_of(const std::string& text) {
  return sizeof(text) + text.capacity();
}

std::size_t bytes_of(const Unit& unit) {
  return bytes_of(unit.name) + sizeof(unit.opd_power);
}

std::size_t bytes_of(const Array& array) {
  std::size_t bytes = bytes_of(array.name) + bytes_of(array.unit) + array.shape.size() * sizeof(std::size_t);
  for (const std::string& axis : array.axes) bytes += bytes_of(axis);
  return bytes +
         std::visit([](const auto& data) { return sizeof(data) + std::span(data).size_bytes(); }, array.data);
}

std::size_t bytes_of(const nlohmann::ordered_json& json) {
  std::size_t bytes = sizeof(json);
  if (json.is_string()) bytes += bytes_of(json.get_ref<const std::string&>());
  if (json.is_array()) {
    for (const auto& item : json) bytes += bytes_of(item);
  }
  if (json.is_object()) {
    for (const auto& [key, item] : json.items()) bytes += bytes_of(key) + bytes_of(item);
  }
  return bytes;
}

}  // namespace

const Value* Result::value(std::string_view name) const {
  return named(values, name);
}

const Array* Result::array(std::string_view name) const {
  return named(arrays, name);
}

std::size_t Result::memory_bytes() const {
  std::size_t bytes = sizeof(*this) + bytes_of(analysis) + bytes_of(subject) + bytes_of(provenance);
  for (const Value& each : values) bytes += sizeof(each) + bytes_of(each.name) + bytes_of(each.unit);
  for (const Array& each : arrays) bytes += bytes_of(each);
  for (const Warning& each : warnings) bytes += bytes_of(each.code) + bytes_of(each.text);
  return bytes;
}

}  // namespace bentlight::query
