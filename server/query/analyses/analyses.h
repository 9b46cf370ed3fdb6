// One function per analysis: its declaration.
#pragma once

#include "query/analysis.h"

namespace bentlight::query {

Analysis statistics();
Analysis series();
Analysis frames();

/// `analyses_of_views` are those whose values may be mapped over the viewing angles of a run.
Analysis field_of_regard(std::vector<Analysis> analyses_of_views);

}  // namespace bentlight::query
