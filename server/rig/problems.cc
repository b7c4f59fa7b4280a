// SPDX-License-Identifier: Apache-2.0
// Order, bounds and wording of problems.
#include "rig/problems.h"

#include <algorithm>
#include <tuple>
#include <utility>

namespace steelyard::rig {
namespace {

bool continues_character(char c) { return (static_cast<unsigned char>(c) & 0xC0U) == 0x80U; }

bool is_control(char c) { return static_cast<unsigned char>(c) < 0x20U || c == 0x7F; }

}  // namespace

std::string Problem::text() const {
  std::string out = file;
  if (line > 0) out.append(":").append(std::to_string(line)).append(":").append(std::to_string(column));
  out += ": ";
  if (!field.empty()) out += field + ": ";
  return out + message;
}

Problems::Problems(std::string_view file, std::string_view text) : file_(file), text_(text) {}

void Problems::add(Place at, std::string_view field, std::string message) {
  if (!full()) found_.push_back({file_, at.line, at.column, std::string(field), std::move(message)});
}

std::vector<Problem> Problems::take() {
  std::vector<Problem> listed = std::exchange(found_, {});
  std::stable_sort(listed.begin(), listed.end(), [](const Problem& a, const Problem& b) {
    return std::tie(a.line, a.column) < std::tie(b.line, b.column);
  });
  if (listed.size() > kMaxListed) {
    const Problem& next = listed[kMaxListed];
    Problem last{file_, next.line, next.column, "",
                 "more problems follow; the first " + std::to_string(kMaxListed) + " are listed"};
    listed.resize(kMaxListed);
    listed.push_back(std::move(last));
  }
  count_characters(listed);
  return listed;
}

std::vector<std::size_t> Problems::line_starts() const {
  std::vector<std::size_t> starts{0};
  for (std::size_t i = 0; i < text_.size(); ++i) {
    if (text_[i] == '\n') starts.push_back(i + 1);
  }
  return starts;
}

// The parser counts bytes; editors count characters. Done for what is listed only: for every node of a long
// line the cost would grow with the square of its length.
void Problems::count_characters(std::vector<Problem>& listed) const {
  const std::vector<std::size_t> starts = line_starts();
  for (Problem& problem : listed) {
    if (problem.line < 1 || static_cast<std::size_t>(problem.line) > starts.size()) continue;
    const std::string_view line = text_.substr(starts[static_cast<std::size_t>(problem.line) - 1]);
    const std::string_view before = line.substr(0, static_cast<std::size_t>(problem.column - 1));
    problem.column -= static_cast<int>(std::count_if(before.begin(), before.end(), continues_character));
  }
}

std::string shown(std::string_view text) {
  constexpr std::size_t kMaxBytes = 60;
  std::string out(text.substr(0, kMaxBytes));
  if (out.size() < text.size()) {
    while (!out.empty() && continues_character(text[out.size()])) out.pop_back();
    out += "...";
  }
  std::replace_if(out.begin(), out.end(), is_control, '?');
  return out;
}

std::string join(std::string_view parent, std::string_view key) {
  std::string out(parent);
  if (!out.empty()) out += '.';
  return out.append(key.empty() ? "\"\"" : shown(key));
}

}  // namespace steelyard::rig
