// SPDX-License-Identifier: Apache-2.0
// See log.h. Numbers are written with std::to_chars, which knows no locale.
#include "log.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <tuple>

namespace steelyard::demo {

namespace {

/// Fixed point, without the zeros at the end.
std::string number(double value, int decimals) {
  std::array<char, 64> buffer{};
  const auto end =
      std::to_chars(buffer.data(), buffer.data() + buffer.size(), value, std::chars_format::fixed, decimals);
  std::string text(buffer.data(), end.ptr);
  if (text.find('.') != std::string::npos) {
    text.erase(text.find_last_not_of('0') + 1);
    if (text.back() == '.') text.pop_back();
  }
  return text == "-0" ? "0" : text;
}

}  // namespace

std::int64_t to_counts(double value, int decimals) { return std::llround(value * std::pow(10.0, decimals)); }

bool write_rows(Log& log, std::ostream& out) {
  std::stable_sort(log.rows.begin(), log.rows.end(), [](const Row& a, const Row& b) {
    return std::tie(a.time_ms, a.channel) < std::tie(b.time_ms, b.channel);
  });
  out << "time,channel,value\n";
  for (const Row& row : log.rows) {
    const double value = static_cast<double>(row.counts) / std::pow(10.0, row.decimals);
    out << number(static_cast<double>(row.time_ms) / 1000.0, 3) << ',' << row.channel << ','
        << number(value, row.decimals) << '\n';
  }
  return static_cast<bool>(out.flush());
}

bool write_events(Log& log, std::ostream& out) {
  std::stable_sort(log.events.begin(), log.events.end(),
                   [](const Event& a, const Event& b) { return a.from_s < b.from_s; });
  const auto clock = [&](double after_s) { return number(static_cast<double>(log.start_s) + after_s, 1); };
  out << "from,to,channel,kind,size\n";
  for (const Event& event : log.events) {
    out << clock(event.from_s) << ',' << clock(event.to_s) << ',' << event.channel << ',' << event.kind << ','
        << number(event.size, 3) << '\n';
  }
  return static_cast<bool>(out.flush());
}

bool write_truth(const Log& log, std::ostream& out) {
  out << log.truth.header << '\n';
  for (const std::vector<double>& line : log.truth.lines) {
    out << number(static_cast<double>(log.start_s) + line.front(), 1);
    for (std::size_t i = 1; i < line.size(); ++i) out << ',' << number(line[i], 5);
    out << '\n';
  }
  return static_cast<bool>(out.flush());
}

}  // namespace steelyard::demo
