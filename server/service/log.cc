// SPDX-License-Identifier: Apache-2.0
// spdlog's set-up. Times are UTC.
#include "service/log.h"

#include <grpc/support/log.h>
#include <spdlog/fmt/fmt.h>
#include <spdlog/pattern_formatter.h>
#include <spdlog/sinks/stdout_sinks.h>
#include <spdlog/spdlog.h>

#include <memory>
#include <string_view>

namespace steelyard::service {
namespace {

void append_escaped(std::string_view text, spdlog::memory_buf_t& out) {
  for (const char c : text) {
    if (c == '"' || c == '\\') {
      out.push_back('\\');
      out.push_back(c);
    } else if (static_cast<unsigned char>(c) < 0x20) {
      fmt::format_to(std::back_inserter(out), "\\u{:04x}",
                     static_cast<unsigned>(static_cast<unsigned char>(c)));
    } else {
      out.push_back(c);
    }
  }
}

/// %* in the pattern: the message as the inside of a JSON string.
class JsonMessage final : public spdlog::custom_flag_formatter {
 public:
  void format(const spdlog::details::log_msg& message, const std::tm&, spdlog::memory_buf_t& out) override {
    append_escaped({message.payload.data(), message.payload.size()}, out);
  }
  [[nodiscard]] std::unique_ptr<custom_flag_formatter> clone() const override {
    return spdlog::details::make_unique<JsonMessage>();
  }
};

std::unique_ptr<spdlog::formatter> make_formatter(LogForm form) {
  auto formatter = std::make_unique<spdlog::pattern_formatter>(spdlog::pattern_time_type::utc);
  if (form == LogForm::kJson) {
    formatter->add_flag<JsonMessage>('*').set_pattern(
        R"({"time":"%Y-%m-%dT%H:%M:%S.%eZ","level":"%l","message":"%*"})");
  } else {
    formatter->set_pattern("%Y-%m-%dT%H:%M:%S.%eZ %l: %v");
  }
  return formatter;
}

void from_grpc(gpr_log_func_args* args) {
  const auto level = args->severity == GPR_LOG_SEVERITY_ERROR ? spdlog::level::warn : spdlog::level::debug;
  spdlog::log(level, "grpc: {}", args->message);
}

}  // namespace

void set_up_log(LogForm form) {
  auto logger = spdlog::stderr_logger_mt("steelyardd");
  logger->set_formatter(make_formatter(form));
  logger->flush_on(spdlog::level::info);
  spdlog::set_default_logger(std::move(logger));
  gpr_set_log_function(from_grpc);
}

}  // namespace steelyard::service
