// Compression of replies, chosen by us: text only, one fast level, bounded size.
#pragma once

#include <memory>
#include <string>
#include <string_view>

namespace bentlight::http {

/// `body` as gzip (RFC 1952), or null when the client does not take it, the type is not text, or it would not pay.
std::shared_ptr<const std::string> compressed(const std::string& body, std::string_view content_type,
                                              std::string_view accept_encoding);

}  // namespace bentlight::http
