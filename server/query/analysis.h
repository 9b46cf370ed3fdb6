// The declaration of an analysis. Routes, parameter checks, OpenAPI, cache keys, jobs, encodings and the page's form
// follow from it.
#pragma once

#include <cstdint>
#include <functional>
#include <string>
#include <vector>

#include "base/error.h"
#include "query/parameter.h"
#include "query/recipe.h"
#include "query/result.h"
#include "query/work.h"

namespace bentlight::query {

enum class SubjectKind { view, run };

/// Where an answer comes from.
enum class Source { index, summary, frames };
std::string_view name(Source source);

/// What an answer will cost, known before the first byte is read.
struct Plan {
  Source source = Source::summary;
  std::uint64_t stored_bytes = 0;   // of the archive's files
  std::uint64_t decoded_bytes = 0;  // frames as float, the measure of the interactive budget
  std::size_t memory_bytes = 0;     // resident while it runs
  bool is_long = false;             // a job from the start, whatever its bytes
};

struct DeclaredValue {
  std::string name;
  std::string unit;     // SI, as in Unit
  std::string summary;
};

struct DeclaredArray {
  std::string name;
  std::string unit;
  std::vector<std::string> axes;
  std::string summary;
};

struct Analysis {
  std::string name;
  std::string summary;  // one sentence
  std::string method;   // estimators with their sources, for provenance
  SubjectKind subject = SubjectKind::view;
  std::vector<Parameter> parameters;  // beside the preparation's
  std::vector<DeclaredValue> values;
  std::vector<DeclaredArray> arrays;

  std::function<Expected<Plan>(const Recipe&)> plan;

  /// SI inside; units of display are put on afterwards. Provenance beyond what holds for every analysis goes into
  /// Result::provenance.
  std::function<Expected<Result>(const Recipe&, Work&)> compute;

  /// For analyses of a run: which inner analysis a question uses, so that its parameters are accepted too.
  std::function<Expected<std::vector<Parameter>>(const RawParameters& given)> more_parameters = {};
};

/// All parameters that a question to `analysis` may hold: the preparation's, its own, and an inner analysis's.
Expected<std::vector<Parameter>> accepted_parameters(const Analysis& analysis, const RawParameters& given);

}  // namespace bentlight::query
