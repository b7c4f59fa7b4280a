// SPDX-License-Identifier: Apache-2.0
#include "timeline/numbers.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <cstddef>
#include <system_error>

namespace steelyard::timeline {
namespace {

constexpr std::size_t kLongestNumber = 512;  // digits of the largest double in fixed form, and some

std::string fixed(double value, int decimals) {
  std::array<char, kLongestNumber> buffer;
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value,
                                          std::chars_format::fixed, std::max(decimals, 0));
  return error == std::errc() ? std::string(buffer.data(), end) : "?";
}

std::string general(double value, int digits) {
  std::array<char, 64> buffer;
  const auto [end, error] =
      std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::general, digits);
  return error == std::errc() ? std::string(buffer.data(), end) : "?";
}

/// Power of ten of the last digit worth writing: the sd's first one, or its second where the first is 1 (an
/// sd of 0.1 may be 0.14, which is too coarse a step).
int last_digit_power(double sd) {
  const int power = static_cast<int>(std::floor(std::log10(sd)));
  const double leading = sd / std::pow(10.0, power);
  return leading < 1.95 ? power - 1 : power;
}

}  // namespace

std::string two_digits(double value) {
  if (!std::isfinite(value) || value == 0.0) return general(value, 2);
  const double magnitude = std::abs(value);
  if (magnitude < 1e-4 || magnitude >= 1e6) return general(value, 2);
  const int power = static_cast<int>(std::floor(std::log10(magnitude))) - 1;
  std::string text = power < 0 ? fixed(value, -power) : fixed(value, 0);
  if (power < 0) {
    text.erase(text.find_last_not_of('0') + 1);
    if (text.ends_with('.')) text.pop_back();
  }
  return text;
}

std::string with_unit(const std::string& number, const std::string& unit) {
  return unit.empty() || unit == "1" ? number : number + " " + unit;
}

std::string percent(double probability) {
  return fixed(std::round(std::clamp(probability, 0.0, 1.0) * 100.0), 0) + " %";
}

std::string age_words(double seconds) {
  if (seconds < 2.0) return fixed(seconds, 1) + " s";
  if (seconds < 120.0) return fixed(std::floor(seconds), 0) + " s";
  if (seconds < 7200.0) return fixed(std::floor(seconds / 60.0), 0) + " min";
  if (seconds < 172800.0) return fixed(std::floor(seconds / 3600.0), 0) + " h";
  return fixed(std::floor(seconds / 86400.0), 0) + " d";
}

std::string rounded(double value, double sd) {
  if (!std::isfinite(value) || !std::isfinite(sd) || !(sd > 0.0)) return general(value, 6);
  const int power = last_digit_power(sd);
  if (power < -12 || power > 12) return general(value, 6);
  std::string text;
  if (power < 0) {
    text = fixed(value, -power);
  } else {
    const double step = std::pow(10.0, power);
    text = fixed(std::round(value / step) * step, 0);
  }
  const bool zero = text.find_first_of("123456789") == std::string::npos;
  return zero && text.starts_with('-') ? text.substr(1) : text;
}

std::string with_sign(double value, double sd) {
  const std::string number = rounded(value, sd);
  return number.starts_with('-') ? number : "+" + number;
}

std::string interval_words(double mean, double sd, bool sign) {
  if (!std::isfinite(sd) || !(sd > 0.0) || !std::isfinite(mean)) return "";
  const auto text = [&](double value) { return sign ? with_sign(value, sd) : rounded(value, sd); };
  return " (90 %: " + text(mean - kHalf90 * sd) + " to " + text(mean + kHalf90 * sd) + ")";
}

}  // namespace steelyard::timeline
