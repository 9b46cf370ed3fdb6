// A file's whole tree, for a person who wants to know what is in it.
#pragma once

#include <nlohmann/json.hpp>

#include "base/error.h"
#include "probe/objects.h"

namespace bentlight::probe {

/// {"objects": [{"path", "kind": "group" | "dataset" | "type" | "link", …}], "truncated": bool}, in the order
/// of a walk by name. Datasets have "shape", "type", "storage", "chunk", "filters"; groups and datasets
/// "attributes" by name; links "target". Broken parts have "fault" and the walk goes on.
Expected<nlohmann::json> describe(const OpenedFile& file);

}  // namespace bentlight::probe
