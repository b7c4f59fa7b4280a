// SPDX-License-Identifier: Apache-2.0
// Drawing with plain characters, so that any terminal shows it.
#include "cli/screen.h"

#include <sys/ioctl.h>
#include <unistd.h>

#include <algorithm>
#include <cmath>

#include "lib/log/text.h"
#include "timeline/words.h"

namespace steelyard::client {
namespace {

constexpr std::size_t kBarWidth = 30;
constexpr std::size_t kTrustWidth = 20;
constexpr double kIn95 = 1.96;  // sds to each side of the mean

std::size_t characters(const std::string& text) {
  return static_cast<std::size_t>(std::count_if(
      text.begin(), text.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xC0U) != 0x80U; }));
}

std::string padded(std::string text, std::size_t width) {
  const std::size_t have = characters(text);
  if (have < width) text.append(width - have, ' ');
  return text;
}

std::string cut(const std::string& text, std::size_t width) {
  std::size_t seen = 0;
  for (std::size_t i = 0; i < text.size(); ++i) {
    if ((static_cast<unsigned char>(text[i]) & 0xC0U) != 0x80U && seen++ == width) return text.substr(0, i);
  }
  return text;
}

std::size_t widest(const std::vector<std::string>& names) {
  std::size_t width = 0;
  for (const std::string& name : names) width = std::max(width, characters(name));
  return width;
}

/// Place of `value` on a bar from lo to hi.
std::size_t place(double value, double lo, double hi) {
  if (!(hi > lo) || !std::isfinite(value)) return kBarWidth / 2;
  const double share = std::clamp((value - lo) / (hi - lo), 0.0, 1.0);
  return static_cast<std::size_t>(std::lround(share * static_cast<double>(kBarWidth - 1)));
}

/// "1" is the unit of what has none.
std::string unit_text(const std::string& unit) { return unit.empty() || unit == "1" ? "" : " " + unit; }

std::string age_text(double age_s) {
  if (age_s < 0.0) return "never";
  if (age_s < 99.95) return timeline::rounded(age_s, 0.3) + " s";
  return timeline::rounded(age_s, 3.0) + " s";
}

}  // namespace

ScreenSize terminal_size() {
  winsize size{};
  if (::ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) != 0 || size.ws_col == 0 || size.ws_row == 0) return {};
  return {size.ws_col, size.ws_row};
}

std::vector<std::string> Screen::draw(const Picture& picture, ScreenSize size) {
  std::vector<std::string> lines;
  lines.push_back(time_text(picture.estimate.time_ns, TimeStyle::kRfc3339) + "   estimate " +
                  picture.quality + (picture.started ? "" : "   no reading yet"));
  lines.emplace_back();
  spans_.resize(picture.names.states.size());
  const std::size_t state_width = widest(picture.names.states);
  for (std::size_t i = 0; i < picture.names.states.size(); ++i) {
    lines.push_back(cut(state_line(picture, i, state_width), size.columns));
  }
  lines.emplace_back();
  const std::size_t channel_width = widest(picture.names.channels);
  for (std::size_t i = 0; i < picture.names.channels.size(); ++i) {
    lines.push_back(channel_line(picture, i, channel_width, size.columns));
  }
  lines.emplace_back();
  lines.push_back(cut("Advice only: trips and interlocks must not depend on it.", size.columns));
  lines.front() = cut(lines.front(), size.columns);
  if (lines.size() > size.rows) lines.resize(size.rows);
  return lines;
}

/// "level   2.034 ± 0.004 m   [.....==|==....]  1.9 … 2.2"
std::string Screen::state_line(const Picture& picture, std::size_t state, std::size_t name_width) {
  const engine::StateEstimate& told = picture.estimate.states[state];
  const double low = told.mean - kIn95 * told.sd;
  const double high = told.mean + kIn95 * told.sd;
  Span& span = spans_[state];
  span.lo = span.any ? std::min(span.lo, low) : low;
  span.hi = span.any ? std::max(span.hi, high) : high;
  span.any = true;
  std::string bar(kBarWidth, '.');
  for (std::size_t i = place(low, span.lo, span.hi); i <= place(high, span.lo, span.hi); ++i) bar[i] = '=';
  bar[place(told.mean, span.lo, span.hi)] = '|';
  const std::string number = timeline::rounded(told.mean, told.sd) + " ± " +
                             timeline::rounded(told.sd, told.sd) + unit_text(picture.state_units[state]);
  const double step = std::max((span.hi - span.lo) / 10.0, 0.0);
  return padded(picture.names.states[state], name_width) + "  " + padded(number, 24) + " [" + bar + "] " +
         timeline::rounded(span.lo, step) + " to " + timeline::rounded(span.hi, step) +
         (told.two_peaked ? "  two peaks" : "");
}

/// "sonic   0.97 [###################.]  1.0 s  sonic is sound, 99 %"
std::string Screen::channel_line(const Picture& picture, std::size_t channel, std::size_t name_width,
                                 std::size_t columns) {
  const engine::ChannelEstimate& told = picture.estimate.channels[channel];
  const double trust = std::isfinite(told.trust) ? std::clamp(told.trust, 0.0, 1.0) : 0.0;
  const auto full = static_cast<std::size_t>(std::lround(trust * static_cast<double>(kTrustWidth)));
  const std::string bar = "[" + std::string(full, '#') + std::string(kTrustWidth - full, '.') + "]";
  std::string line = padded(picture.names.channels[channel], name_width) + "  trust " +
                     padded(timeline::rounded(trust, 0.03), 4) + " " + bar + "  " +
                     padded(age_text(told.age_s), 8) + picture.words[channel];
  line = cut(line, columns);
  if (!colour_) return line;
  // Where sound leads the line stands as it is; else it stands out.
  const bool sound = timeline::leading_condition(told) == engine::Condition::kSound && told.silent <= 0.5;
  return sound ? line : "\x1b[1;35m" + line + "\x1b[0m";
}

}  // namespace steelyard::client
