// CSV (RFC 4180, lines end in CR LF), with two additions that it does not know: lines that begin with '#' say
// what the table is about, and a blank line stands between tables.
//
//   # analysis = series; subject = v1; digest = 0f…; length_unit = um
//   # opd_rms_mean = 0.12 um [0.11; 0.13] at 0.95
//   time [s],low [um],high [um]
//   0,0.1,0.12
//
// 1-D arrays along one axis stand side by side, each axis in a table of its own. `array=` chooses the table
// of a 1-D array, or gives an array of more dimensions as a matrix: the first row holds the last axis, each
// further row begins with its places on the other axes. A number that is not finite is an empty cell.
#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <optional>

#include "base/text.h"
#include "query/encode/encoding.h"
#include "query/encode/text_writer.h"

namespace bentlight::query {

namespace {

constexpr std::string_view line_end = "\r\n";

/// `text` on one line: a line break inside a cell would let the rest of it pass for a line with '#'.
std::string one_line(std::string_view text) {
  std::string line(text);
  std::ranges::replace_if(
      line, [](char c) { return static_cast<unsigned char>(c) < 0x20; }, ' ');
  return line;
}

/// A cell of text. What a spreadsheet would take for a formula is kept from being one by a leading
/// apostrophe.
///
///   source  OWASP, CSV injection, from memory
std::string text_cell(std::string_view text) {
  std::string cell = one_line(text);
  if (!cell.empty() && std::string_view("=+-@").find(cell.front()) != std::string_view::npos)
    cell.insert(0, 1, '\'');
  if (!cell.starts_with('#') && cell.find_first_of(",\"") == std::string::npos) return cell;
  std::string quoted = "\"";
  for (const char c : cell) {
    if (c == '"') quoted += '"';
    quoted += c;
  }
  return quoted + '"';
}

/// A line about the table: without commas, quotes and line breaks it is one cell to any reader.
void write_comment(TextWriter& out, std::string_view text) {
  out.text("# ");
  for (const char c : one_line(text)) out.letter(c == ',' ? ';' : c == '"' ? '\'' : c);
  out.text(line_end);
}

/// `is_alone` in its row: an empty cell would make a blank line, which stands for the end of a table.
template <class Number>
void write_number(TextWriter& out, Number value, bool is_alone = false) {
  if (std::isfinite(value)) {
    out.number(value);
  } else if (is_alone) {
    out.text("\"\"");
  }
}

void write_element(TextWriter& out, const Array& array, std::size_t index, bool is_alone = false) {
  std::visit([&](const auto& data) { write_number(out, data[index], is_alone); }, array.data);
}

std::string title(std::string_view name, const Unit& unit) {
  return fmt::format("{} [{}]", name, unit.name);
}

std::string number_text(double value) {
  return std::isfinite(value) ? shortest(value) : "not finite";
}

void write_value(TextWriter& out, const Value& value) {
  std::string line = fmt::format("{} = {} {}", value.name, number_text(value.value), value.unit.name);
  if (value.low && value.high)
    line += fmt::format(" [{}; {}]", number_text(*value.low), number_text(*value.high));
  if (value.level) line += fmt::format(" at {}", number_text(*value.level));
  write_comment(out, line);
}

std::string scalar_line(const Array& array) {
  TextWriter number;
  write_element(number, array, 0);
  return fmt::format("{} = {} {}", array.name, number.take(), array.unit.name);
}

std::string shape_line(const Array& array) {
  std::string extents;
  for (const std::size_t extent : array.shape)
    extents += fmt::format("{}{}", extents.empty() ? "" : " x ", extent);
  return fmt::format("{} of {} [{}] is left out here: ask for it by array={}", array.name, extents,
                     array.unit.name, array.name);
}

/// The text of a member of the provenance, empty where it has none.
std::string provenance_text(const Result& result, const nlohmann::ordered_json::json_pointer& place) {
  const auto& provenance = result.provenance;
  if (!provenance.is_object() || !provenance.contains(place)) return {};
  const auto& member = provenance.at(place);
  return member.is_string() ? member.get<std::string>() : std::string();
}

void write_head(TextWriter& out, const Result& result) {
  std::string line = fmt::format("analysis = {}; subject = {}", result.analysis, result.subject);
  const std::string digest = provenance_text(result, "/digest"_json_pointer);
  const std::string unit = provenance_text(result, "/length_unit/unit"_json_pointer);
  if (!digest.empty()) line += "; digest = " + digest;
  if (!unit.empty()) line += "; length_unit = " + unit;
  write_comment(out, line);
  for (const Value& value : result.values) write_value(out, value);
  for (const Warning& warning : result.warnings) {
    write_comment(out, fmt::format("warning {}: {}", warning.code, warning.text));
  }
}

/// 1-D arrays of one axis, its own values first where the result holds them.
struct Table {
  std::string axis;
  std::size_t rows = 0;
  std::vector<const Array*> columns;

  bool holds(const Array& array) const { return std::ranges::find(columns, &array) != columns.end(); }
};

std::string axis_of(const Result& result, const Array& array) {
  return array.axes.empty() || is_axis(result, array) ? array.name : array.axes.front();
}

std::vector<Table> tables_of(const Result& result) {
  std::vector<Table> tables;
  for (const Array& array : result.arrays) {
    if (array.shape.size() != 1) continue;
    const std::string axis = axis_of(result, array);
    auto table = std::ranges::find_if(
        tables, [&](const Table& each) { return each.axis == axis && each.rows == array.shape.front(); });
    if (table == tables.end())
      table = tables.insert(tables.end(), Table{.axis = axis, .rows = array.shape.front(), .columns = {}});
    table->columns.insert(array.name == axis ? table->columns.begin() : table->columns.end(), &array);
  }
  return tables;
}

void write_table(TextWriter& out, const Table& table) {
  for (std::size_t i = 0; i < table.columns.size(); ++i) {
    if (i > 0) out.letter(',');
    out.text(text_cell(title(table.columns[i]->name, table.columns[i]->unit)));
  }
  out.text(line_end);
  const bool is_alone = table.columns.size() == 1;
  for (std::size_t row = 0; row < table.rows; ++row) {
    for (std::size_t i = 0; i < table.columns.size(); ++i) {
      if (i > 0) out.letter(',');
      write_element(out, *table.columns[i], row, is_alone);
    }
    out.text(line_end);
  }
}

/// One axis of a matrix: the result's own array, or plain numbers from 0 where it holds none.
struct MatrixAxis {
  const Array* values = nullptr;
  std::string name;

  std::string heading() const { return values != nullptr ? title(values->name, values->unit) : name; }
  void write_place(TextWriter& out, std::size_t index) const {
    if (values != nullptr) {
      write_element(out, *values, index);
    } else {
      out.number(index);
    }
  }
};

std::vector<MatrixAxis> matrix_axes(const Result& result, const Array& array) {
  std::vector<MatrixAxis> axes(array.shape.size());
  for (std::size_t i = 0; i < axes.size(); ++i) {
    axes[i].name =
        i < array.axes.size() && !array.axes[i].empty() ? array.axes[i] : fmt::format("index_{}", i);
    const Array* values = result.array(axes[i].name);
    if (values != nullptr && values->shape == std::vector{array.shape[i]}) axes[i].values = values;
  }
  return axes;
}

/// The places on all axes but the last, as the cells that a row begins with.
void write_row_places(TextWriter& out,
                      const Array& array,
                      const std::vector<MatrixAxis>& axes,
                      std::size_t row) {
  std::size_t rows_inside = 1;
  for (std::size_t i = 1; i + 1 < axes.size(); ++i) rows_inside *= array.shape[i];
  for (std::size_t i = 0; i + 1 < axes.size(); ++i) {
    axes[i].write_place(out, row / rows_inside);
    out.letter(',');
    row %= rows_inside;
    if (i + 2 < axes.size()) rows_inside /= array.shape[i + 1];
  }
}

void write_matrix(TextWriter& out, const Result& result, const Array& array) {
  const auto axes = matrix_axes(result, array);
  const std::size_t columns = array.shape.back();
  const std::size_t rows = columns == 0 ? 0 : element_count(array) / columns;
  write_comment(
      out, fmt::format("{}: the first row holds {}", title(array.name, array.unit), axes.back().heading()));
  for (std::size_t i = 0; i + 1 < axes.size(); ++i) {
    out.text(text_cell(axes[i].heading()));
    out.letter(',');
  }
  for (std::size_t column = 0; column < columns; ++column) {
    if (column > 0) out.letter(',');
    axes.back().write_place(out, column);
  }
  out.text(line_end);
  for (std::size_t row = 0; row < rows; ++row) {
    write_row_places(out, array, axes, row);
    for (std::size_t column = 0; column < columns; ++column) {
      if (column > 0) out.letter(',');
      write_element(out, array, row * columns + column);
    }
    out.text(line_end);
  }
}

void write_all_tables(TextWriter& out, const Result& result) {
  for (const Array& array : result.arrays) {
    if (array.shape.empty()) write_comment(out, scalar_line(array));
    if (array.shape.size() > 1) write_comment(out, shape_line(array));
  }
  bool is_first = true;
  for (const Table& table : tables_of(result)) {
    if (!is_first) out.text(line_end);
    is_first = false;
    write_table(out, table);
  }
}

void write_one(TextWriter& out, const Result& result, const Array& array) {
  if (array.shape.empty()) return write_comment(out, scalar_line(array));
  if (array.shape.size() > 1) return write_matrix(out, result, array);
  const auto tables = tables_of(result);
  write_table(out, *std::ranges::find_if(tables, [&](const Table& table) { return table.holds(array); }));
}

}  // namespace

Expected<std::string> encode_csv(const Result& result, const std::string& name) {
  const Array* array = name.empty() ? nullptr : result.array(name);
  if (array == nullptr && !name.empty()) return no_such_array(result, name);
  TextWriter out;
  write_head(out, result);
  if (array != nullptr) {
    write_one(out, result, *array);
  } else {
    write_all_tables(out, result);
  }
  return out.take();
}

}  // namespace bentlight::query
