#include "probe/tree.h"

#include <fmt/format.h>

#include <algorithm>
#include <array>
#include <set>
#include <string>
#include <utility>
#include <vector>

#include "base/limits.h"
#include "probe/hdf5_error.h"

namespace bentlight::probe {

namespace {

using nlohmann::json;

constexpr std::size_t attributes_shown = 64;
constexpr std::size_t text_shown = 256;

class TreeWalk {
 public:
  explicit TreeWalk(const OpenedFile& file) : file_(file) {}

  json run() {
    visit_object("/", 0);
    return {{"objects", std::move(objects_)}, {"truncated", is_truncated_}};
  }

 private:
  void visit_object(const std::string& path, std::size_t depth) {
    const Handle object(H5Oopen(file_.id(), path.c_str(), H5P_DEFAULT), H5Oclose);
    H5O_info_t info{};
    if (!object || H5Oget_info2(object.id(), &info, H5O_INFO_BASIC) < 0) {
      add({{"path", path}, {"kind", "unknown"}, {"fault", with_library_fault("cannot be opened")}});
      return;
    }
    json entry = {{"path", path}, {"attributes", attributes_of(object.id())}};
    // Hard links may make a circle; an object is walked once.
    const bool is_new = seen_.insert(info.addr).second;
    switch (H5Iget_type(object.id())) {
      case H5I_GROUP:
        entry["kind"] = "group";
        add(std::move(entry));
        if (is_new) visit_members(object.id(), path, depth);
        break;
      case H5I_DATASET:
        entry["kind"] = "dataset";
        describe_dataset(object.id(), path, entry);
        add(std::move(entry));
        break;
      default:
        entry["kind"] = "type";
        add(std::move(entry));
    }
  }

  void visit_members(hid_t group, const std::string& path, std::size_t depth) {
    if (depth >= limits::tree_depth) {
      is_truncated_ = true;
      return;
    }
    std::vector<std::string> names;
    const auto note = [](hid_t, const char* name, const H5L_info_t*, void* out) -> herr_t {
      auto& list = *static_cast<std::vector<std::string>*>(out);
      list.emplace_back(name);
      return list.size() >= limits::tree_objects ? 1 : 0;
    };
    if (H5Literate(group, H5_INDEX_NAME, H5_ITER_INC, nullptr, note, &names) < 0) {
      add({{"path", path},
           {"kind", "unknown"},
           {"fault", with_library_fault("its members cannot be listed")}});
    }
    for (const std::string& name : names) {
      if (objects_.size() >= limits::tree_objects) {
        is_truncated_ = true;
        return;
      }
      visit_link(group, name, (path == "/" ? "" : path) + "/" + name, depth);
    }
  }

  void visit_link(hid_t group, const std::string& name, const std::string& path, std::size_t depth) {
    H5L_info_t info{};
    if (H5Lget_info(group, name.c_str(), &info, H5P_DEFAULT) < 0) {
      add({{"path", path}, {"kind", "unknown"}, {"fault", with_library_fault("cannot be looked at")}});
    } else if (info.type == H5L_TYPE_HARD) {
      visit_object(path, depth + 1);
    } else {
      add({{"path", path}, {"kind", "link"}, {"target", link_target(group, name, info)}});
    }
  }

  static std::string link_target(hid_t group, const std::string& name, const H5L_info_t& info) {
    if (info.type != H5L_TYPE_SOFT && info.type != H5L_TYPE_EXTERNAL) return "user-defined";
    std::vector<char> value(std::min(info.u.val_size, 64 * limits::kibi) + 1, '\0');
    if (H5Lget_val(group, name.c_str(), value.data(), value.size() - 1, H5P_DEFAULT) < 0) {
      return with_library_fault("unknown");
    }
    if (info.type == H5L_TYPE_SOFT) return value.data();
    const char* other = nullptr;
    const char* inside = nullptr;
    if (H5Lunpack_elink_val(value.data(), value.size() - 1, nullptr, &other, &inside) < 0) {
      return with_library_fault("unknown");
    }
    return fmt::format("{}:{} (in another file)", other, inside);
  }

  void describe_dataset(hid_t dataset, const std::string& path, json& entry) const {
    const Handle type(H5Dget_type(dataset), H5Tclose);
    const Handle creation(H5Dget_create_plist(dataset), H5Pclose);
    const auto shape = shape_of(file_.source, dataset, path);
    if (!shape || !type || !creation) {
      entry["fault"] = with_library_fault("its shape, type or storage cannot be read");
      return;
    }
    entry["shape"] = *shape;
    entry["type"] = type_text(type.id());
    entry["storage"] = storage_text(creation.id());
    json filters = json::array();
    for (int i = 0; i < H5Pget_nfilters(creation.id()); ++i) {
      filters.push_back(filter_text(creation.id(), static_cast<unsigned>(i)));
    }
    entry["filters"] = filters;
    if (H5Pget_layout(creation.id()) == H5D_CHUNKED) {
      std::vector<hsize_t> chunk(shape->size());
      H5Pget_chunk(creation.id(), static_cast<int>(chunk.size()), chunk.data());
      entry["chunk"] = chunk;
    }
  }

  static std::string storage_text(hid_t creation) {
    if (H5Pget_external_count(creation) > 0) return "external files";
    switch (H5Pget_layout(creation)) {
      case H5D_COMPACT:
        return "compact";
      case H5D_CONTIGUOUS:
        return "contiguous";
      case H5D_CHUNKED:
        return "chunked";
      case H5D_VIRTUAL:
        return "virtual";
      default:
        return "unknown";
    }
  }

  json attributes_of(hid_t object) const {
    std::vector<std::string> names;
    const auto note = [](hid_t, const char* name, const H5A_info_t*, void* out) -> herr_t {
      auto& list = *static_cast<std::vector<std::string>*>(out);
      list.emplace_back(name);
      return list.size() >= attributes_shown ? 1 : 0;
    };
    H5Aiterate2(object, H5_INDEX_NAME, H5_ITER_INC, nullptr, note, &names);
    H5Eclear2(H5E_DEFAULT);
    json attributes = json::object();
    for (const std::string& name : names) {
      const auto content = attribute(file_.source, object, name);
      if (!content) {
        attributes[name] = "(" + content.error().text + ")";
      } else if (*content) {
        if (const auto* number = std::get_if<double>(&**content)) attributes[name] = *number;
        if (const auto* text = std::get_if<Text>(&**content)) attributes[name] = text->substr(0, text_shown);
      }
    }
    return attributes;
  }

  void add(json entry) { objects_.push_back(std::move(entry)); }

  const OpenedFile& file_;
  json objects_ = json::array();
  std::set<haddr_t> seen_;
  bool is_truncated_ = false;
};

}  // namespace

Expected<nlohmann::json> describe(const OpenedFile& file) {
  return TreeWalk(file).run();
}

}  // namespace bentlight::probe
