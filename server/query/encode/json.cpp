// JSON (RFC 8259): the result's shape as the interface promises it, members always in the same order. An
// array's data are flat and row-major beside its shape, so that a reader needs one reshape and no nesting.
// Numbers that are not finite are null.
#include <cmath>

#include "base/text.h"
#include "query/encode/encoding.h"
#include "query/encode/text_writer.h"

namespace bentlight::query {

namespace {

template <class Number>
void write_number(TextWriter& out, Number value) {
  if (std::isfinite(value)) {
    out.number(value);
  } else {
    out.text("null");
  }
}

void write_text(TextWriter& out, std::string_view text) {
  out.text(json_quoted(text));
}

/// Writes `items` between commas.
template <class Items, class Write>
void write_each(TextWriter& out, const Items& items, Write write) {
  bool is_first = true;
  for (const auto& item : items) {
    if (!is_first) out.letter(',');
    is_first = false;
    write(item);
  }
}

void write_value(TextWriter& out, const Value& value) {
  write_text(out, value.name);
  out.text(":{\"value\":");
  write_number(out, value.value);
  out.text(",\"unit\":");
  write_text(out, value.unit.name);
  const auto write_if_given = [&](std::string_view key, const std::optional<double>& number) {
    if (!number) return;
    out.text(key);
    write_number(out, *number);
  };
  write_if_given(",\"low\":", value.low);
  write_if_given(",\"high\":", value.high);
  write_if_given(",\"level\":", value.level);
  out.letter('}');
}

void write_array(TextWriter& out, const Array& array) {
  write_text(out, array.name);
  out.text(":{\"shape\":[");
  write_each(out, array.shape, [&](std::size_t extent) { out.number(extent); });
  out.text("],\"unit\":");
  write_text(out, array.unit.name);
  out.text(",\"axes\":[");
  write_each(out, array.axes, [&](const std::string& axis) { write_text(out, axis); });
  out.text("],\"data\":[");
  std::visit(
      [&](const auto& data) { write_each(out, data, [&](auto number) { write_number(out, number); }); },
      array.data);
  out.text("]}");
}

void write_warning(TextWriter& out, const Warning& warning) {
  out.text("{\"code\":");
  write_text(out, warning.code);
  out.text(",\"text\":");
  write_text(out, warning.text);
  out.letter('}');
}

std::string provenance_text(const nlohmann::ordered_json& provenance) {
  if (provenance.is_null()) return "{}";
  return provenance.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace);
}

}  // namespace

std::string encode_json(const Result& result) {
  TextWriter out;
  out.text("{\"analysis\":");
  write_text(out, result.analysis);
  out.text(",\"subject\":");
  write_text(out, result.subject);
  out.text(",\"values\":{");
  write_each(out, result.values, [&](const Value& value) { write_value(out, value); });
  out.text("},\"arrays\":{");
  write_each(out, result.arrays, [&](const Array& array) { write_array(out, array); });
  out.text("},\"warnings\":[");
  write_each(out, result.warnings, [&](const Warning& warning) { write_warning(out, warning); });
  out.text("],\"provenance\":");
  out.text(provenance_text(result.provenance));
  out.letter('}');
  return out.take();
}

}  // namespace bentlight::query
