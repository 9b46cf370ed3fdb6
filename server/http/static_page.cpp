#include "http/static_page.h"

#include <algorithm>
#include <array>

#include "base/digest.h"
#include "base/limits.h"
#include "base/text.h"

namespace bentlight::http {

namespace {

struct FileKind {
  std::string_view ending;
  std::string_view content_type;
};

constexpr std::array file_kinds = {
    FileKind{".html", "text/html; charset=utf-8"},      FileKind{".css", "text/css; charset=utf-8"},
    FileKind{".js", "text/javascript; charset=utf-8"},  FileKind{".svg", "image/svg+xml"},
    FileKind{".png", "image/png"},                      FileKind{"LICENSE", "text/plain; charset=utf-8"},
};

constexpr std::string_view content_security_policy =
    "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data: blob:; connect-src 'self'; "
    "base-uri 'none'; form-action 'none'; frame-ancestors 'none'; require-trusted-types-for 'script'; "
    "trusted-types 'none'";

/// True when every step of `path` is a plain name: no "..", no hidden file, no empty step.
bool is_plain(const std::string& path) {
  const auto steps = split(path, '/');
  return std::ranges::all_of(steps, [](const std::string& step) {
    return !step.empty() && step.front() != '.' && std::ranges::all_of(step, [](char c) {
      return std::isalnum(static_cast<unsigned char>(c)) || c == '.' || c == '_' || c == '-';
    });
  });
}

}  // namespace

Expected<Reply> StaticPage::find(const std::string& path) const {
  const auto unknown = failure(ErrorCode::unknown_route, "nothing is at " + path);
  std::string name = path.substr(1);
  if (name.empty()) name = "index.html";
  if (!is_plain(name)) return unknown;
  const auto kind = std::ranges::find_if(file_kinds, [&](const FileKind& each) { return name.ends_with(each.ending); });
  if (kind == file_kinds.end()) return unknown;
  constexpr std::string_view vendor = "vendor/";
  const auto place = name.starts_with(vendor) ? vendor_ / name.substr(vendor.size()) : page_ / name;
  auto text = read_whole(files_, place, 4 * limits::mebi);
  if (!text) return unknown;
  Reply reply{.content_type = std::string(kind->content_type),
              .etag = sha256_hex(*text).substr(0, 32),
              .headers = {{"Content-Security-Policy", std::string(content_security_policy)},
                          {"Referrer-Policy", "no-referrer"},
                          {"Cross-Origin-Opener-Policy", "same-origin"}}};
  reply.body = std::make_shared<const std::string>(std::move(*text));
  return reply;
}

}  // namespace bentlight::http
