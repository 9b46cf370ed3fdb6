// Encodings: a result as the bytes of a reply. What each looks like stands in its own file beside this one.
#pragma once

#include <cstddef>
#include <memory>
#include <span>
#include <string>
#include <string_view>

#include "base/error.h"
#include "base/limits.h"
#include "query/result.h"

namespace bentlight::query {

enum class Encoding { json, csv, npy, hdf5 };

/// All encodings, the preferred first: the order decides when a client likes several equally.
std::span<const Encoding> all_encodings();

/// The name by which an encoding is asked for, such as "npy".
std::string_view name(Encoding encoding);

/// What Accept and Content-Type call it. source  RFC 8259 for JSON, RFC 4180 for CSV; for NPY and HDF5 common
/// practice
std::string_view media_type(Encoding encoding);

/// errors  unsupported_encoding, with the names there are
Expected<Encoding> parse_encoding(std::string_view name);

/// The best encoding for an Accept header field; JSON when the field is empty. Of ranges that match an
/// encoding the most specific decides, as in RFC 9110, section 12.5.1. A range that is not well formed is
/// left out.
///
///   errors  unsupported_encoding when nothing on offer is acceptable
Expected<Encoding> negotiated_encoding(std::string_view accept);

struct EncodeOptions {
  std::string array = {};  // csv and npy: which array; empty where that is clear or not needed
  std::size_t limit_bytes = limits::result_bytes;
};

/// A reply's body, shared between the cache and whoever is sending it.
struct Encoded {
  std::string content_type;
  std::string file_suffix;  // without a dot
  std::shared_ptr<const std::string> bytes;
};

/// `result` as bytes.
///
///   needs   arrays whose data fill their shapes
///   errors  bad_parameter: no such array, or an array named where everything is encoded;
///           unsupported_encoding: npy, and which array is not clear; too_large; out of memory as in
///           Hdf5Writer
Expected<Encoded> encode(const Result& result, Encoding encoding, const EncodeOptions& options = {});

// One function per encoding, each in its own file.
std::string encode_json(const Result& result);
Expected<std::string> encode_csv(const Result& result, const std::string& array);
Expected<std::string> encode_npy(const Result& result, const std::string& array);
Expected<std::string> encode_hdf5(const Result& result);

/// Whether another array of the result lies along `array`.
bool is_axis(const Result& result, const Array& array);

/// The number of elements; that of a shape without dimensions is 1.
std::size_t element_count(const Array& array);

/// An unknown name as an error that lists those there are.
tl::unexpected<Error> no_such_array(const Result& result, const std::string& name);

}  // namespace bentlight::query
