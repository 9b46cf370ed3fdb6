#include "http/compression.h"

#include <libdeflate.h>

#include "base/limits.h"
#include "base/text.h"

namespace bentlight::http {

namespace {

bool takes_gzip(std::string_view accept_encoding) {
  for (std::string part : split(accept_encoding, ',')) {
    std::erase(part, ' ');
    if (part == "gzip") return true;
    if (part.starts_with("gzip;q=")) return parse_number(part.substr(7)).value_or(0.0) > 0.0;
  }
  return false;
}

bool is_text(std::string_view content_type) {
  return content_type.starts_with("text/") || content_type.find("json") != std::string_view::npos ||
         content_type.find("javascript") != std::string_view::npos ||
         content_type.find("openmetrics") != std::string_view::npos;
}

}  // namespace

std::shared_ptr<const std::string> compressed(const std::string& body, std::string_view content_type,
                                              std::string_view accept_encoding) {
  // Below a kilobyte it saves no packet; above 32 MiB it would hold a connection's thread for a second.
  if (body.size() < limits::kibi || body.size() > 32 * limits::mebi) return nullptr;
  if (!is_text(content_type) || !takes_gzip(accept_encoding)) return nullptr;
  const std::unique_ptr<libdeflate_compressor, decltype(&libdeflate_free_compressor)> compressor(
      libdeflate_alloc_compressor(1), &libdeflate_free_compressor);
  if (!compressor) return nullptr;
  std::string out(libdeflate_gzip_compress_bound(compressor.get(), body.size()), '\0');
  const std::size_t size = libdeflate_gzip_compress(compressor.get(), body.data(), body.size(), out.data(), out.size());
  if (size == 0 || size >= body.size()) return nullptr;
  out.resize(size);
  return std::make_shared<const std::string>(std::move(out));
}

}  // namespace bentlight::http
