// SPDX-License-Identifier: Apache-2.0
// Drawing with plain characters, so that any terminal shows it.
#include "cli/screen.h"

#include <sys/ioctl.h>
#include <unistd.h>

#include <algorithm>
#include <cmath>
#include <utility>

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

/// Lines of at most `width` characters, broken at blanks, the first not before `head` characters; those after
/// the first are indented.
std::vector<std::string> wrapped(const std::string& text, std::size_t head, std::size_t width) {
  constexpr std::size_t kIndent = 4;
  constexpr std::size_t kLeast = 20;  // characters for words that are worth a line
  if (width < head + kLeast) return {cut(text, width)};
  std::vector<std::string> lines;
  std::string rest = text;
  while (characters(rest) > width && lines.size() < 8) {
    const std::string begin = cut(rest, width + 1);
    const std::size_t blank = begin.rfind(' ');
    const std::size_t least = lines.empty() ? head : kIndent;
    if (blank == std::string::npos || blank <= least) break;
    lines.push_back(rest.substr(0, blank));
    rest = std::string(kIndent, ' ') + rest.substr(blank + 1);
  }
  lines.push_back(cut(rest, width));
  return lines;
}

/// "explained by   93 %  sonic offset by +0.182 m (…) for 42 s"; none where every channel is sound.
std::vector<std::string> explanation_lines(const Picture& picture, std::size_t columns) {
  const auto& channels = picture.estimate.channels;
  const bool all_sound = std::all_of(channels.begin(), channels.end(), [](const auto& channel) {
    return timeline::leading_kind(channel) == timeline::kSoundKind;
  });
  std::vector<std::string> lines;
  const std::size_t count = std::min(picture.explanations.size(), picture.estimate.explanations.size());
  for (std::size_t i = 0; i < count && !all_sound; ++i) {
    const std::string head = (i == 0 ? "explained by   " : "or else        ") +
                             padded(timeline::percent(picture.estimate.explanations[i].probability), 7);
    for (std::string& line : wrapped(head + picture.explanations[i], characters(head), columns)) {
      lines.push_back(std::move(line));
    }
  }
  if (!lines.empty()) lines.emplace_back();
  return lines;
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
    for (std::string& line : channel_lines(picture, i, channel_width, size.columns)) {
      lines.push_back(std::move(line));
    }
  }
  lines.emplace_back();
  for (std::string& line : explanation_lines(picture, size.columns)) lines.push_back(std::move(line));
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

/// "sonic   0.97 [###################.]  1.0 s  sonic is sound, 99 %"; long sentences go on below.
std::vector<std::string> Screen::channel_lines(const Picture& picture, std::size_t channel,
                                               std::size_t name_width, std::size_t columns) {
  const engine::ChannelEstimate& told = picture.estimate.channels[channel];
  const double trust = std::isfinite(told.trust) ? std::clamp(told.trust, 0.0, 1.0) : 0.0;
  const auto full = static_cast<std::size_t>(std::lround(trust * static_cast<double>(kTrustWidth)));
  const std::string bar = "[" + std::string(full, '#') + std::string(kTrustWidth - full, '.') + "]";
  const std::string head = padded(picture.names.channels[channel], name_width) + "  trust " +
                           padded(timeline::rounded(trust, 0.03), 4) + " " + bar + "  " +
                           padded(age_text(told.age_s), 8);
  std::vector<std::string> lines = wrapped(head + picture.words[channel], characters(head), columns);
  // Where sound leads the lines stand as they are; else they stand out.
  if (!colour_ || timeline::leading_kind(told) == timeline::kSoundKind) return lines;
  for (std::string& line : lines) line = "\x1b[1;35m" + line + "\x1b[0m";
  return lines;
}

}  // namespace steelyard::client
