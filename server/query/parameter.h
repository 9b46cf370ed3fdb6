// The parameters of a question: declared once, and from the declaration checked, defaulted, documented and drawn.
#pragma once

#include <functional>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.h"

namespace bentlight::query {

/// Parameters as a caller wrote them: name and text. A name given twice is refused before this is built.
using RawParameters = std::map<std::string, std::string, std::less<>>;

enum class ParameterKind { number, whole_number, choice, text };

/// One parameter of an analysis or of the common preparation.
struct Parameter {
  std::string name;
  ParameterKind kind = ParameterKind::number;
  std::string unit = {};     // "s", "frames", "m"; empty when it has none
  std::string summary = {};  // one sentence for a person
  std::string standard = {};  // the default as text; empty: the parameter may stay away
  double low = -1e300, high = 1e300;       // for numbers, both allowed
  std::vector<std::string> choices = {};   // for choice
  std::string pattern = {};                // for text: what it must match (ECMAScript), documented as such
  std::string example = {};
};

/// Checks `text` against `parameter` and gives its canonical form: numbers in their shortest form, so that 0.10 and
/// 1e-1 are one question.
///
///   errors  bad_parameter naming the parameter, the text, and what is accepted
Expected<std::string> canonical_text(const Parameter& parameter, std::string_view text);

/// Checks all of `given` against `declared`, fills in defaults, and gives the canonical texts by name. Parameters
/// without default that were not given are absent.
///
///   errors  unknown_parameter listing the known ones, bad_parameter
Expected<RawParameters> canonical_parameters(const std::vector<Parameter>& declared, const RawParameters& given);

}  // namespace bentlight::query
