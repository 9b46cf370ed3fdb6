// Small helpers for text: names that are safe in an address, and JSON's quoting for one string.
#pragma once

#include <optional>
#include <string>
#include <string_view>
#include <vector>

namespace bentlight {

/// `text` in lower case with every run of other characters than letters, digits and '.' as one '-': fit for an
/// address. Empty when nothing remains.
std::string slug(std::string_view text);

std::vector<std::string> split(std::string_view text, char separator);

/// A decimal number that fills the whole of `text`; finite only.
std::optional<double> parse_number(std::string_view text);
std::optional<long long> parse_whole_number(std::string_view text);

/// The shortest decimal form that reads back to the same double.
std::string shortest(double value);

/// `text` with quotes, as JSON writes a string (RFC 8259, section 7). Bytes that are not UTF-8 become U+FFFD.
std::string json_quoted(std::string_view text);

}  // namespace bentlight
