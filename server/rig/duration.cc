// SPDX-License-Identifier: Apache-2.0
// Durations with their unit: "250 ms", "60 s", "5 min", "2 h", "30 d".
#include <array>
#include <charconv>
#include <cmath>

#include "rig/number.h"
#include "rig/rig.h"

namespace steelyard::rig {
namespace {

struct Unit {
  std::string_view name;
  double seconds;
};
constexpr std::array<Unit, 4> kUnits{{{"d", 86400.0}, {"h", 3600.0}, {"min", 60.0}, {"s", 1.0}}};

std::string with_unit(double value, std::string_view unit) {
  std::array<char, 400> buffer{};  // the longest double without an exponent has some 330 characters
  const auto result =
      std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::fixed);
  return std::string(buffer.data(), result.ptr) + " " + std::string(unit);
}

}  // namespace

std::optional<double> parse_duration_s(std::string_view text) {
  const Prefix number = number_prefix(text);
  if (number.length == 0 || !std::isfinite(number.value)) return std::nullopt;
  std::string_view unit = text.substr(number.length);
  while (!unit.empty() && unit[0] == ' ') unit.remove_prefix(1);
  if (unit == "ms") return number.value / 1000.0;
  for (const Unit& candidate : kUnits) {
    if (unit != candidate.name) continue;
    const double seconds = number.value * candidate.seconds;
    return std::isfinite(seconds) ? std::optional(seconds) : std::nullopt;
  }
  return std::nullopt;
}

std::string duration_text(double seconds) {
  std::string best = with_unit(seconds, "s");
  if (seconds == 0.0) return best;
  const auto consider = [&](const std::string& text) {
    const bool shorter = text.size() < best.size();
    const bool whole = text.size() == best.size() && text.find('.') == std::string::npos;
    if ((shorter || whole) && parse_duration_s(text) == seconds) best = text;
  };
  consider(with_unit(seconds * 1000.0, "ms"));
  consider(with_unit(seconds / 60.0, "min"));
  consider(with_unit(seconds / 3600.0, "h"));
  consider(with_unit(seconds / 86400.0, "d"));
  return best;
}

}  // namespace steelyard::rig
