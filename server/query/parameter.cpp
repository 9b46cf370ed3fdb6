#include "query/parameter.h"

#include <algorithm>
#include <regex>

#include <fmt/format.h>
#include <fmt/ranges.h>

#include "base/limits.h"
#include "base/text.h"

namespace bentlight::query {

namespace {

std::string range_text(const Parameter& parameter) {
  return fmt::format("{} to {}{}{}", shortest(parameter.low), shortest(parameter.high),
                     parameter.unit.empty() ? "" : " ", parameter.unit);
}

tl::unexpected<Error> refused(const Parameter& parameter, std::string_view text, std::string_view reason,
                              std::vector<std::string> accepted) {
  return failure(ErrorCode::bad_parameter,
                 fmt::format("{}={} is not accepted: {}", parameter.name, text, reason), parameter.name,
                 std::move(accepted));
}

Expected<std::string> canonical_number(const Parameter& parameter, std::string_view text) {
  const auto value = parse_number(text);
  if (!value) return refused(parameter, text, "it is not a decimal number", {range_text(parameter)});
  if (*value < parameter.low || *value > parameter.high) {
    return refused(parameter, text, "it lies outside " + range_text(parameter), {range_text(parameter)});
  }
  return shortest(*value == 0.0 ? 0.0 : *value);  // -0 is 0
}

Expected<std::string> canonical_whole_number(const Parameter& parameter, std::string_view text) {
  const auto value = parse_whole_number(text);
  if (!value) return refused(parameter, text, "it is not a whole number", {range_text(parameter)});
  if (static_cast<double>(*value) < parameter.low || static_cast<double>(*value) > parameter.high) {
    return refused(parameter, text, "it lies outside " + range_text(parameter), {range_text(parameter)});
  }
  return fmt::format("{}", *value);
}

}  // namespace

Expected<std::string> canonical_text(const Parameter& parameter, std::string_view text) {
  if (text.size() > limits::parameter_bytes) {
    return refused(parameter, fmt::format("{}…", text.substr(0, 32)),
                   fmt::format("it is longer than {} bytes", limits::parameter_bytes), {});
  }
  switch (parameter.kind) {
    case ParameterKind::number:
      return canonical_number(parameter, text);
    case ParameterKind::whole_number:
      return canonical_whole_number(parameter, text);
    case ParameterKind::choice:
      if (std::ranges::find(parameter.choices, text) == parameter.choices.end()) {
        return refused(parameter, text, fmt::format("choose one of {}", fmt::join(parameter.choices, ", ")),
                       parameter.choices);
      }
      return std::string(text);
    case ParameterKind::text:
      if (!parameter.pattern.empty() &&
          !std::regex_match(text.begin(), text.end(), std::regex(parameter.pattern))) {
        return refused(parameter, text, "it has another form than such a value",
                       parameter.example.empty() ? std::vector<std::string>{} : std::vector{parameter.example});
      }
      return std::string(text);
  }
  throw std::logic_error("canonical_text: a kind of parameter without a check");
}

Expected<RawParameters> canonical_parameters(const std::vector<Parameter>& declared, const RawParameters& given) {
  RawParameters canonical;
  for (const auto& [name, text] : given) {
    const auto parameter = std::ranges::find(declared, name, &Parameter::name);
    if (parameter == declared.end()) {
      std::vector<std::string> known;
      for (const Parameter& each : declared) known.push_back(each.name);
      return failure(ErrorCode::unknown_parameter,
                     fmt::format("there is no parameter {} here; known are {}", name, fmt::join(known, ", ")), name,
                     known);
    }
    auto checked = canonical_text(*parameter, text);
    if (!checked) return failure(checked);
    canonical.emplace(name, std::move(*checked));
  }
  for (const Parameter& parameter : declared) {
    if (!parameter.standard.empty()) canonical.try_emplace(parameter.name, parameter.standard);
  }
  return canonical;
}

}  // namespace bentlight::query
