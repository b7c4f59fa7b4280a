// SPDX-License-Identifier: Apache-2.0
// std::from_chars and std::to_chars do not look at the locale.
#include "rig/number.h"

#include <array>
#include <charconv>
#include <cmath>
#include <limits>
#include <system_error>

namespace steelyard::rig {
namespace {

bool is_digit(char c) { return c >= '0' && c <= '9'; }

// from_chars would also take "inf" and "nan".
bool begins_number(std::string_view text) {
  if (text.empty()) return false;
  if (text[0] == '.') return text.size() > 1 && is_digit(text[1]);
  return is_digit(text[0]);
}

}  // namespace

Prefix number_prefix(std::string_view text) {
  if (!begins_number(text)) return {};
  Prefix out;
  const auto [end, error] = std::from_chars(text.data(), text.data() + text.size(), out.value);
  out.length = static_cast<std::size_t>(end - text.data());
  // Both ends of the range report the same error; only a negative exponent makes a number too small.
  if (error == std::errc::result_out_of_range) {
    const bool small = text.substr(0, out.length).find('-') != std::string_view::npos;
    out.value = small ? 0.0 : std::numeric_limits<double>::infinity();
  }
  return out;
}

std::optional<double> parse_number(std::string_view text) {
  const bool has_sign = !text.empty() && (text[0] == '-' || text[0] == '+');
  const std::string_view digits = text.substr(has_sign ? 1 : 0);
  const Prefix prefix = number_prefix(digits);
  if (prefix.length == 0 || prefix.length != digits.size() || !std::isfinite(prefix.value))
    return std::nullopt;
  return text[0] == '-' ? -prefix.value : prefix.value;
}

std::string number_text(double value) {
  std::array<char, 32> buffer{};
  const auto result = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value);
  return {buffer.data(), result.ptr};
}

}  // namespace steelyard::rig
