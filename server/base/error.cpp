#include "base/error.h"

#include <array>
#include <cerrno>
#include <system_error>

#include <fmt/format.h>

namespace bentlight {

namespace {

struct NamedCode {
  ErrorCode code;
  std::string_view name;
};

constexpr std::array named_codes = {
    NamedCode{ErrorCode::unknown_parameter, "unknown-parameter"},
    NamedCode{ErrorCode::bad_parameter, "bad-parameter"},
    NamedCode{ErrorCode::bad_unit, "bad-unit"},
    NamedCode{ErrorCode::missing_condition, "missing-condition"},
    NamedCode{ErrorCode::empty_window, "empty-window"},
    NamedCode{ErrorCode::aperture_outside_mask, "aperture-outside-mask"},
    NamedCode{ErrorCode::degenerate_aperture, "degenerate-aperture"},
    NamedCode{ErrorCode::unknown_analysis, "unknown-analysis"},
    NamedCode{ErrorCode::unknown_view, "unknown-view"},
    NamedCode{ErrorCode::unknown_run, "unknown-run"},
    NamedCode{ErrorCode::unknown_campaign, "unknown-campaign"},
    NamedCode{ErrorCode::unknown_job, "unknown-job"},
    NamedCode{ErrorCode::unknown_result, "unknown-result"},
    NamedCode{ErrorCode::unknown_route, "unknown-route"},
    NamedCode{ErrorCode::unsupported_method, "unsupported-method"},
    NamedCode{ErrorCode::unsupported_encoding, "unsupported-encoding"},
    NamedCode{ErrorCode::unsupported_preparation, "unsupported-preparation"},
    NamedCode{ErrorCode::request_too_large, "request-too-large"},
    NamedCode{ErrorCode::not_hdf5, "not-hdf5"},
    NamedCode{ErrorCode::damaged_file, "damaged-file"},
    NamedCode{ErrorCode::layout_mismatch, "layout-mismatch"},
    NamedCode{ErrorCode::unsupported_storage, "unsupported-storage"},
    NamedCode{ErrorCode::unsafe_file, "unsafe-file"},
    NamedCode{ErrorCode::too_large, "too-large"},
    NamedCode{ErrorCode::file_changed, "file-changed"},
    NamedCode{ErrorCode::file_missing, "file-missing"},
    NamedCode{ErrorCode::not_indexed, "not-indexed"},
    NamedCode{ErrorCode::damaged_state, "damaged-state"},
    NamedCode{ErrorCode::overloaded, "overloaded"},
    NamedCode{ErrorCode::memory_budget, "memory-budget"},
    NamedCode{ErrorCode::shutting_down, "shutting-down"},
    NamedCode{ErrorCode::cancelled, "cancelled"},
    NamedCode{ErrorCode::timed_out, "timed-out"},
    NamedCode{ErrorCode::io_error, "io-error"},
    NamedCode{ErrorCode::disk_full, "disk-full"},
    NamedCode{ErrorCode::permission_denied, "permission-denied"},
    NamedCode{ErrorCode::state_locked, "state-locked"},
    NamedCode{ErrorCode::newer_state, "newer-state"},
    NamedCode{ErrorCode::bad_option, "bad-option"},
    NamedCode{ErrorCode::internal, "internal"},
};

constexpr auto codes_in_order = [] {
  std::array<ErrorCode, named_codes.size()> codes{};
  for (std::size_t i = 0; i < codes.size(); ++i) codes[i] = named_codes[i].code;
  return codes;
}();

constexpr bool table_follows_the_enumeration() {
  for (std::size_t i = 0; i < codes_in_order.size(); ++i) {
    if (static_cast<std::size_t>(codes_in_order[i]) != i) return false;
  }
  return codes_in_order.back() == ErrorCode::internal;
}
static_assert(table_follows_the_enumeration());

}  // namespace

std::string_view name(ErrorCode code) { return named_codes.at(static_cast<std::size_t>(code)).name; }

std::span<const ErrorCode> all_error_codes() { return codes_in_order; }

ErrorCode code_of_errno(int error_number) {
  switch (error_number) {
    case ENOSPC:
    case EDQUOT:
      return ErrorCode::disk_full;
    case EACCES:
    case EPERM:
    case EROFS:
      return ErrorCode::permission_denied;
    case ENOENT:
    case ENOTDIR:
      return ErrorCode::file_missing;
    default:
      return ErrorCode::io_error;
  }
}

tl::unexpected<Error> system_failure(int error_number, std::string_view what, std::string subject) {
  return failure(code_of_errno(error_number),
                 fmt::format("{}: {}", what, std::generic_category().message(error_number)), std::move(subject));
}

}  // namespace bentlight
