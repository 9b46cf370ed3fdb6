// Errors as values: what can happen to a correct program travels in the return type.
#pragma once

#include <cstdint>
#include <span>
#include <string>
#include <string_view>
#include <vector>

#include <tl/expected.hpp>

namespace bentlight {

/// What a caller should do next decides the code, not where the fault arose. Names are stable and never reused;
/// schema/errors.json lists them for users.
enum class ErrorCode {
  // Mend the request.
  unknown_parameter,
  bad_parameter,
  bad_unit,
  missing_condition,
  empty_window,
  aperture_outside_mask,
  degenerate_aperture,
  unknown_analysis,
  unknown_view,
  unknown_run,
  unknown_campaign,
  unknown_job,
  unknown_result,
  unknown_route,
  unsupported_method,
  unsupported_encoding,
  unsupported_preparation,
  request_too_large,
  // The file is not one that can be read.
  not_hdf5,
  damaged_file,
  layout_mismatch,
  unsupported_storage,
  unsafe_file,
  too_large,
  // Index anew, or wait for it.
  file_changed,
  file_missing,
  not_indexed,
  damaged_state,
  // Wait and ask again.
  overloaded,
  memory_budget,
  shutting_down,
  cancelled,
  timed_out,
  // Mend the installation.
  io_error,
  disk_full,
  permission_denied,
  state_locked,
  newer_state,
  bad_option,
  // A fault of the program.
  internal,
};

/// The stable name of a code as users see it, such as "unknown-parameter".
std::string_view name(ErrorCode code);

/// Every code, in the order of the enumeration: for the document of errors and its test.
std::span<const ErrorCode> all_error_codes();

/// What went wrong: for a program (code), for a person (text), and where to look (subject).
struct Error {
  ErrorCode code = ErrorCode::internal;
  std::string text;                       // one sentence, with the value that was given
  std::string subject = {};               // the parameter, view or file it is about
  std::vector<std::string> accepted = {};  // what would have been accepted, when that is a short list
};

template <class T>
using Expected = tl::expected<T, Error>;

/// An Expected in its failed state; for `return failure(ErrorCode::bad_unit, "…", "length_unit", {"um", "nm"});`
inline tl::unexpected<Error> failure(ErrorCode code, std::string text, std::string subject = {},
                                     std::vector<std::string> accepted = {}) {
  return tl::unexpected<Error>(Error{code, std::move(text), std::move(subject), std::move(accepted)});
}

/// Passes a failure on unchanged: `if (!file) return failure(file);`
template <class T>
tl::unexpected<Error> failure(const Expected<T>& failed) {
  return tl::unexpected<Error>(failed.error());
}

/// The code for an errno of the operating system: disk_full, permission_denied, file_missing or io_error.
ErrorCode code_of_errno(int error_number);

/// A failed call of the operating system on `subject`; the text holds the system's own sentence.
tl::unexpected<Error> system_failure(int error_number, std::string_view what, std::string subject);

}  // namespace bentlight
