// Feeds any bytes to the decoder of kept results: once as they are, once behind a right preamble and
// checksum, so that the search gets past them. Whatever comes, the answer is a refusal or a result that every
// text encoder takes.
#include <algorithm>
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <span>
#include <string_view>

#include "query/encode/encoding.h"
#include "query/result_codec.h"

namespace {

using namespace bentlight;

void use(const Expected<query::Result>& result) {
  if (!result) return;
  if (query::encode_json(*result).empty() || !query::encode_csv(*result, "")) std::abort();
  if (!query::decode_result(query::encode_result(*result))) std::abort();
}

}  // namespace

/// The first two bytes say how long the head is; the rest is the head and then the numbers.
extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t bytes) {
  const auto all = std::as_bytes(std::span(data, bytes));
  use(query::decode_result(all));
  if (bytes < 2) return 0;
  const auto body = all.subspan(2);
  const std::size_t head_bytes = std::min<std::size_t>(body.size(), data[0] + 256U * data[1]);
  const std::string_view head(reinterpret_cast<const char*>(body.data()), head_bytes);
  use(query::decode_result(query::sealed_result(head, body.subspan(head_bytes))));
  return 0;
}
