// SPDX-License-Identifier: Apache-2.0
// Numbers and times as text. All arithmetic on times is in integers.
#include "lib/log/text.h"

#include <array>
#include <charconv>
#include <chrono>
#include <cmath>
#include <cstdint>
#include <limits>

namespace steelyard::client {
namespace {

using engine::TimeNs;
// Seconds × 1e9 of any accepted text fits with room to spare.
__extension__ typedef __int128 Wide;

constexpr std::int64_t kNsPerS = 1'000'000'000;
constexpr std::size_t kMaxSecondDigits = 12;  // 1e12 s is far beyond what nanoseconds in 64 bits can tell

bool is_digit(char c) { return c >= '0' && c <= '9'; }

/// Takes digits off the front of a text, so that parsers read as the grammar does.
class Scanner {
 public:
  explicit Scanner(std::string_view text) : rest_(text) {}

  bool take(char c) {
    if (rest_.empty() || rest_.front() != c) return false;
    rest_.remove_prefix(1);
    return true;
  }
  bool take_any(std::string_view chars) {
    if (rest_.empty() || chars.find(rest_.front()) == std::string_view::npos) return false;
    rest_.remove_prefix(1);
    return true;
  }
  std::string_view digits() {
    std::size_t n = 0;
    while (n < rest_.size() && is_digit(rest_[n])) ++n;
    const std::string_view found = rest_.substr(0, n);
    rest_.remove_prefix(n);
    return found;
  }
  /// Exactly `count` digits as a number; −1 if there are fewer.
  int number(std::size_t count) {
    if (rest_.size() < count) return -1;
    int value = 0;
    for (std::size_t i = 0; i < count; ++i) {
      if (!is_digit(rest_[i])) return -1;
      value = value * 10 + (rest_[i] - '0');
    }
    rest_.remove_prefix(count);
    return value;
  }
  [[nodiscard]] bool at_end() const { return rest_.empty(); }

 private:
  std::string_view rest_;
};

/// "25" after a point → 250 000 000; the tenth digit rounds. May return 1e9 (0.9999999999).
std::int64_t fraction_ns(std::string_view digits) {
  std::int64_t ns = 0;
  for (std::size_t i = 0; i < 9; ++i) ns = ns * 10 + (i < digits.size() ? digits[i] - '0' : 0);
  return digits.size() > 9 && digits[9] >= '5' ? ns + 1 : ns;
}

std::optional<TimeNs> narrow(Wide ns) {
  if (ns < std::numeric_limits<TimeNs>::min() || ns > std::numeric_limits<TimeNs>::max()) return std::nullopt;
  return static_cast<TimeNs>(ns);
}

std::optional<TimeNs> parse_seconds(std::string_view text) {
  Scanner scan(text);
  const bool negative = scan.take('-');
  if (!negative) scan.take('+');
  std::string_view whole = scan.digits();
  std::string_view fraction;
  const bool has_whole = !whole.empty();
  if (scan.take('.')) fraction = scan.digits();
  if (!scan.at_end() || (!has_whole && fraction.empty())) return std::nullopt;
  while (whole.size() > 1 && whole.front() == '0') whole.remove_prefix(1);
  if (whole.size() > kMaxSecondDigits) return std::nullopt;
  Wide seconds = 0;
  for (const char c : whole) seconds = seconds * 10 + (c - '0');
  const Wide ns = seconds * kNsPerS + fraction_ns(fraction);
  return narrow(negative ? -ns : ns);
}

/// Z or ±hh:mm at the end, in minutes; nullopt if it is neither.
std::optional<int> parse_offset_min(Scanner& scan) {
  if (scan.take_any("Zz")) return 0;
  const bool west = scan.take('-');
  if (!west && !scan.take('+')) return std::nullopt;
  const int hour = scan.number(2);
  if (!scan.take(':')) return std::nullopt;
  const int minute = scan.number(2);
  if (hour < 0 || hour > 23 || minute < 0 || minute > 59) return std::nullopt;
  const int total = hour * 60 + minute;
  return west ? -total : total;
}

std::optional<TimeNs> parse_rfc3339(std::string_view text) {
  Scanner scan(text);
  const int year = scan.number(4);
  if (year < 0 || !scan.take('-')) return std::nullopt;
  const int month = scan.number(2);
  if (month < 0 || !scan.take('-')) return std::nullopt;
  const int day = scan.number(2);
  if (day < 0 || !scan.take_any("Tt ")) return std::nullopt;
  const int hour = scan.number(2);
  if (hour < 0 || hour > 23 || !scan.take(':')) return std::nullopt;
  const int minute = scan.number(2);
  if (minute < 0 || minute > 59 || !scan.take(':')) return std::nullopt;
  const int second = scan.number(2);
  if (second < 0 || second > 60) return std::nullopt;
  std::string_view fraction;
  if (scan.take('.') && (fraction = scan.digits()).empty()) return std::nullopt;
  const std::optional<int> offset_min = parse_offset_min(scan);
  if (!offset_min || !scan.at_end()) return std::nullopt;

  const std::chrono::year_month_day date{std::chrono::year{year},
                                         std::chrono::month{static_cast<unsigned>(month)},
                                         std::chrono::day{static_cast<unsigned>(day)}};
  if (!date.ok()) return std::nullopt;
  const std::int64_t days = std::chrono::sys_days(date).time_since_epoch().count();
  const std::int64_t minutes = days * 1440 + hour * 60 + minute - *offset_min;
  // A leap second stands only at the end of a UTC day; it is counted as the second after it, as clocks do.
  if (second == 60 && (minutes % 1440 + 1440) % 1440 != 1439) return std::nullopt;
  return narrow(Wide{minutes * 60 + second} * kNsPerS + fraction_ns(fraction));
}

/// ".25" for 250 000 000; nothing for 0.
void append_fraction(std::string& out, std::int64_t ns) {
  if (ns == 0) return;
  std::string digits = std::to_string(ns);
  digits.insert(0, 9 - digits.size(), '0');
  digits.erase(digits.find_last_not_of('0') + 1);
  out += '.';
  out += digits;
}

void append_padded(std::string& out, std::int64_t value, std::size_t width) {
  const std::string digits = std::to_string(value);
  if (digits.size() < width) out.append(width - digits.size(), '0');
  out += digits;
}

std::string rfc3339_text(TimeNs time_ns) {
  std::int64_t seconds = time_ns / kNsPerS;
  std::int64_t ns = time_ns % kNsPerS;
  if (ns < 0) {
    ns += kNsPerS;
    --seconds;
  }
  const std::chrono::sys_seconds at{std::chrono::seconds{seconds}};
  const auto day = std::chrono::floor<std::chrono::days>(at);
  const std::chrono::year_month_day date{day};
  const std::chrono::hh_mm_ss clock{at - day};
  std::string out;
  append_padded(out, static_cast<int>(date.year()), 4);
  out += '-';
  append_padded(out, static_cast<unsigned>(date.month()), 2);
  out += '-';
  append_padded(out, static_cast<unsigned>(date.day()), 2);
  out += 'T';
  append_padded(out, clock.hours().count(), 2);
  out += ':';
  append_padded(out, clock.minutes().count(), 2);
  out += ':';
  append_padded(out, clock.seconds().count(), 2);
  append_fraction(out, ns);
  out += 'Z';
  return out;
}

}  // namespace

std::optional<TimeNs> parse_time(std::string_view text) {
  if (text.size() > 4 && text[4] == '-' && is_digit(text[0])) return parse_rfc3339(text);
  return parse_seconds(text);
}

std::string time_text(TimeNs time_ns, TimeStyle style) {
  if (style == TimeStyle::kRfc3339) return rfc3339_text(time_ns);
  // The magnitude is taken unsigned: the most negative time has no positive counterpart.
  const bool negative = time_ns < 0;
  const auto bits = static_cast<std::uint64_t>(time_ns);
  const std::uint64_t magnitude = negative ? 0 - bits : bits;
  std::string out = negative ? "-" : "";
  out += std::to_string(magnitude / static_cast<std::uint64_t>(kNsPerS));
  append_fraction(out, static_cast<std::int64_t>(magnitude % static_cast<std::uint64_t>(kNsPerS)));
  return out;
}

std::optional<double> parse_number(std::string_view text) {
  // from_chars takes no plus sign, but loggers write one.
  if (text.size() > 1 && text.front() == '+' && text[1] != '-') text.remove_prefix(1);
  double value = 0.0;
  const char* const end = text.data() + text.size();
  const auto [stop, error] = std::from_chars(text.data(), end, value);
  if (stop != end || error == std::errc::invalid_argument) return std::nullopt;
  if (error != std::errc::result_out_of_range) return value;
  const bool tiny = text.find("e-") != std::string_view::npos || text.find("E-") != std::string_view::npos;
  return tiny ? 0.0 : std::numeric_limits<double>::infinity();
}

void append_number(std::string& out, double value) {
  std::array<char, 32> buffer;
  const auto [end, error] = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value);
  if (error == std::errc()) out.append(buffer.data(), end);
}

std::string shown(std::string_view text) {
  constexpr std::size_t kMost = 40;
  std::string out = "\"";
  std::size_t characters = 0;
  for (const char c : text) {
    const bool starts_character = (static_cast<unsigned char>(c) & 0xC0U) != 0x80U;
    if (starts_character && ++characters > kMost) return out + "…\"";
    const auto code = static_cast<unsigned char>(c);
    out += code < 0x20 || code == 0x7F ? '?' : c;
  }
  return out + '"';
}

}  // namespace steelyard::client
