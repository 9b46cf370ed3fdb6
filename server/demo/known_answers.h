// What is true of a demo archive, for programs (known_answers.json) and people (README.txt).
#pragma once

#include <nlohmann/json.hpp>
#include <string>

#include "demo/expectation.h"
#include "demo/scenario.h"
#include "demo/shapes.h"

namespace bentlight::demo {

inline constexpr const char* known_answers_file = "known_answers.json";
inline constexpr const char* readme_file = "README.txt";
inline constexpr const char* generator_name = "bentlight demo";

nlohmann::ordered_json known_answers(const Scenario& scenario,
                                     const DemoGrid& grid,
                                     const ExpectedStatistics& statistics);

std::string readme(const Scenario& scenario);

}  // namespace bentlight::demo
