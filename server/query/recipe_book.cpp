#include "query/recipe_book.h"

#include <algorithm>

#include <nlohmann/json.hpp>

#include "base/limits.h"
#include "query/analysis.h"

namespace bentlight::query {

std::filesystem::path RecipeBook::place_of(const std::string& digest) const {
  return folder_ / digest.substr(0, 2) / (digest + ".json");
}

Expected<void> RecipeBook::keep(const Recipe& recipe) const {
  const auto place = place_of(recipe.digest);
  std::error_code ignored;  // replace() reports what matters: whether the file could be written
  if (std::filesystem::exists(place, ignored)) return {};
  std::filesystem::create_directories(place.parent_path(), ignored);
  const nlohmann::ordered_json question = {{"analysis", recipe.analysis->name},
                                           {"subject", recipe.subject},
                                           {"is_about_run", recipe.analysis->subject == SubjectKind::run},
                                           {"parameters", recipe.parameters}};
  return files_.replace(place, as_bytes(question.dump()));
}

Expected<AskedQuestion> RecipeBook::find(const std::string& digest) const {
  const auto unknown = failure(ErrorCode::unknown_result, "no result of this digest was ever given here", digest);
  const bool is_digest =
      digest.size() == 32 && std::ranges::all_of(digest, [](char c) { return std::isxdigit(static_cast<unsigned char>(c)); });
  if (!is_digest) return unknown;
  const auto text = read_whole(files_, place_of(digest), limits::mebi);
  if (!text) return unknown;
  const auto question = nlohmann::json::parse(*text, nullptr, /*allow_exceptions=*/false);
  if (!question.is_object()) return unknown;
  try {
    return AskedQuestion{.analysis = question.at("analysis"),
                         .subject = question.at("subject"),
                         .is_about_run = question.at("is_about_run"),
                         .parameters = question.at("parameters").get<RawParameters>()};
  } catch (const nlohmann::json::exception&) {
    return unknown;  // a torn file is a question that was never kept
  }
}

}  // namespace bentlight::query
