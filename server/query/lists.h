// What is there: campaigns, runs, views and refusals as JSON, with filters and paging.
#pragma once

#include <string>
#include <vector>

#include <nlohmann/json.hpp>

#include "base/error.h"
#include "index/index.h"
#include "query/catalogue.h"
#include "query/open_view.h"
#include "query/parameter.h"

namespace bentlight::query {

/// One page of a list, or one item.
struct Listing {
  nlohmann::ordered_json json;
  std::string next_offset;  // empty on the last page
  std::string etag;         // changes whenever the index does
};

/// Filters that a list takes. Ranges are written low..high, either end may stay away: mach=0.4..0.6, frames=1000..
std::vector<Parameter> view_filters();
std::vector<Parameter> run_filters();
std::vector<Parameter> paging();

/// threads  safe from any thread
class Lists {
 public:
  Lists(const index::Index& index, ViewShelf& shelf, const Catalogue& catalogue)
      : index_(index), shelf_(shelf), catalogue_(catalogue) {}

  /// errors  unknown_parameter, bad_parameter for filters
  Expected<Listing> campaigns(const RawParameters& given) const;
  Expected<Listing> runs(const RawParameters& given) const;
  Expected<Listing> views(const RawParameters& given) const;
  Expected<Listing> refusals(const RawParameters& given) const;

  /// One view with its conditions, geometry, checks, signals and which analyses are cheap. errors  unknown_view
  Expected<Listing> view(const std::string& id) const;

  /// errors  unknown_run
  Expected<Listing> run(const std::string& id) const;

  Expected<index::IndexCounts> counts() const { return index_.counts(); }

 private:
  const index::Index& index_;
  ViewShelf& shelf_;
  const Catalogue& catalogue_;
};

}  // namespace bentlight::query
