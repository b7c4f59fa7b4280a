// SPDX-License-Identifier: Apache-2.0
#include "cli/report_text.h"

#include <array>
#include <charconv>
#include <system_error>

#include "rig/rig.h"

namespace steelyard::client {
namespace {

constexpr double kHour_s = 3600.0;
constexpr double kDay_s = 86400.0;

}  // namespace

std::string digits(double value, int significant) {
  std::array<char, 64> buffer;
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value,
                                          std::chars_format::general, significant);
  return error == std::errc() ? std::string(buffer.data(), end) : "?";
}

std::string number(double value) { return digits(value, 6); }

std::string with_unit(double value, const std::string& unit) {
  return unit.empty() ? number(value) : number(value) + " " + unit;
}

std::string joined(const std::vector<std::string>& words, const char* none) {
  if (words.empty()) return none;
  std::string out;
  for (const std::string& word : words) out += (out.empty() ? "" : ", ") + word;
  return out;
}

std::string counted(std::size_t count, const char* what) {
  return std::to_string(count) + " " + what + (count == 1 ? "" : "s");
}

std::string long_duration(double seconds) {
  const std::string text = rig::duration_text(seconds);
  std::vector<std::string> also;
  if (!text.ends_with(" h")) also.push_back(digits(seconds / kHour_s, 4) + " h");
  if (!text.ends_with(" d") && seconds >= kDay_s) also.push_back(digits(seconds / kDay_s, 4) + " d");
  return also.empty() ? text : text + " (" + joined(also, "") + ")";
}

}  // namespace steelyard::client
