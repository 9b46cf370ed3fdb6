// Quality checks of a view, each with a code, a figure and a plain sentence.
#pragma once

#include <cstddef>
#include <string>

#include "archive/wavefront_file.h"
#include "index/summary_store.h"

namespace bentlight::ingest {

/// The checks that found something, as a JSON array of {code, severity, figure, text}.
std::string checks_json(const archive::WavefrontFile& file,
                        const index::SummaryData& summary,
                        std::size_t dead_points);

}  // namespace bentlight::ingest
