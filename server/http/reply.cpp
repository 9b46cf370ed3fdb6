#include "http/reply.h"

#include <nlohmann/json.hpp>

namespace bentlight::http {

int status_of(ErrorCode code) {
  switch (code) {
    case ErrorCode::unknown_parameter:
    case ErrorCode::bad_parameter:
    case ErrorCode::bad_unit:
    case ErrorCode::empty_window:
    case ErrorCode::aperture_outside_mask:
    case ErrorCode::degenerate_aperture:
    case ErrorCode::bad_option:
      return 400;
    case ErrorCode::permission_denied:
      return 403;
    case ErrorCode::unknown_analysis:
    case ErrorCode::unknown_view:
    case ErrorCode::unknown_run:
    case ErrorCode::unknown_campaign:
    case ErrorCode::unknown_job:
    case ErrorCode::unknown_result:
    case ErrorCode::unknown_route:
      return 404;
    case ErrorCode::unsupported_method:
      return 405;
    case ErrorCode::unsupported_encoding:
      return 406;
    case ErrorCode::cancelled:
    case ErrorCode::file_changed:
    case ErrorCode::file_missing:
    case ErrorCode::not_indexed:
      return 409;
    case ErrorCode::request_too_large:
    case ErrorCode::too_large:
    case ErrorCode::memory_budget:
      return 413;
    case ErrorCode::missing_condition:
    case ErrorCode::unsupported_preparation:
    case ErrorCode::not_hdf5:
    case ErrorCode::damaged_file:
    case ErrorCode::layout_mismatch:
    case ErrorCode::unsupported_storage:
    case ErrorCode::unsafe_file:
      return 422;
    case ErrorCode::overloaded:
    case ErrorCode::shutting_down:
    case ErrorCode::timed_out:
      return 503;
    case ErrorCode::disk_full:
      return 507;
    case ErrorCode::damaged_state:
    case ErrorCode::io_error:
    case ErrorCode::state_locked:
    case ErrorCode::newer_state:
    case ErrorCode::internal:
      return 500;
  }
  throw std::logic_error("status_of: a code without a status");
}

namespace {

std::string title_of(ErrorCode code) {
  std::string title(name(code));
  for (char& c : title) {
    if (c == '-') c = ' ';
  }
  title.front() = static_cast<char>(std::toupper(static_cast<unsigned char>(title.front())));
  return title;
}

}  // namespace

Reply problem_reply(const Error& error, const std::string& instance) {
  const int status = status_of(error.code);
  nlohmann::ordered_json problem = {{"type", "urn:bentlight:problem:" + std::string(name(error.code))},
                                    {"title", title_of(error.code)},
                                    {"status", status},
                                    {"detail", error.text},
                                    {"instance", instance},
                                    {"code", std::string(name(error.code))}};
  if (!error.subject.empty()) problem["parameter"] = error.subject;
  if (!error.accepted.empty()) problem["accepted"] = error.accepted;
  Reply reply{.status = status,
              .content_type = "application/problem+json",
              .body = std::make_shared<const std::string>(
                  problem.dump(-1, ' ', false, nlohmann::json::error_handler_t::replace))};
  if (status == 503) reply.headers.emplace_back("Retry-After", "2");
  return reply;
}

}  // namespace bentlight::http
