// SPDX-License-Identifier: Apache-2.0
// Values, their rules, and the wording of what breaks them.
#include "rig/values.h"

#include <algorithm>
#include <utility>

#include "rig/nearest.h"
#include "rig/number.h"

namespace steelyard::rig {
namespace {

constexpr double kLongest_s = 36525.0 * 86400.0;
constexpr std::size_t kMaxTextValueBytes = 500;
constexpr std::string_view kDurationForm = "a duration with its unit (ms, s, min, h, d), such as 60 s";

std::string listed(std::span<const std::string_view> names) {
  std::string out;
  for (const std::string_view name : names) out += (out.empty() ? "" : ", ") + std::string(name);
  return out;
}

bool is_control(char c) { return static_cast<unsigned char>(c) < 0x20U || c == 0x7F; }

}  // namespace

Fields::Fields(const Item& map, std::span<const std::string_view> known, Problems& problems)
    : map_(map), problems_(problems) {
  if (!map.node->is_map()) {
    report_rule(map, "a map with the keys " + listed(known), problems);
    return;
  }
  for (const Node& item : map.node->items) {
    if (problems.full()) return;
    if (std::find(known.begin(), known.end(), item.key) != known.end()) continue;
    problems.add(item.key_at, join(map.path, item.key), "is not a known key" + did_you_mean(item.key, known));
  }
}

std::optional<Item> Fields::optional(std::string_view key) const {
  const Node* node = map_.node->find(key);
  if (node == nullptr) return std::nullopt;
  return Item{node, join(map_.path, key)};
}

std::optional<Item> Fields::required(std::string_view key) const {
  std::optional<Item> item = optional(key);
  if (!item && map_.node->is_map()) {
    const bool has_key = map_.node->key_at.line > 0;
    problems_.add(has_key ? map_.node->key_at : map_.node->at, join(map_.path, key), "is missing");
  }
  return item;
}

bool Limit::allows(double value) const {
  return (value > lo || (with_lo && value == lo)) && (value < hi || (with_hi && value == hi));
}

std::string Limit::rule() const {
  std::string out;
  if (lo > -std::numeric_limits<double>::infinity()) {
    out = (with_lo ? "at least " : "greater than ") + number_text(lo);
  }
  if (hi < std::numeric_limits<double>::infinity()) {
    out += (out.empty() ? "" : " and ") + std::string(with_hi ? "at most " : "less than ") + number_text(hi);
  }
  return out;
}

std::string described(const Node& node) {
  switch (node.kind) {
    case Node::Kind::kEmpty:
      return "empty";
    case Node::Kind::kList:
      return "a list";
    case Node::Kind::kMap:
      return "a map";
    case Node::Kind::kScalar:
      break;
  }
  return node.text.empty() ? "\"\"" : shown(node.text);
}

void report_rule(const Item& item, std::string_view rule, Problems& problems) {
  problems.add(item.place(), item.path, "is " + described(*item.node) + "; must be " + std::string(rule));
}

std::optional<double> read_number(const Item& item, const Limit& limit, Problems& problems) {
  const auto value = item.node->is_scalar() ? parse_number(item.node->text) : std::nullopt;
  if (value && limit.allows(*value)) return value;
  const std::string rule = limit.rule();
  const std::string kind = rule.empty() ? "a finite number" : "a number, ";
  report_rule(item, value ? rule : kind + rule, problems);
  return std::nullopt;
}

std::optional<double> read_duration_s(const Item& item, Problems& problems, Zero zero) {
  const bool is_negative = item.node->is_scalar() && item.node->text.starts_with('-');
  const std::string_view text = std::string_view(item.node->text).substr(is_negative ? 1 : 0);
  const auto value = item.node->is_scalar() ? parse_duration_s(text) : std::nullopt;
  if (!value) {
    report_rule(item, kDurationForm, problems);
  } else if (is_negative || (*value == 0.0 && zero == Zero::kRefused)) {
    report_rule(item, zero == Zero::kAllowed ? "0 or longer" : "longer than 0", problems);
  } else if (*value > kLongest_s) {
    report_rule(item, "at most 36525 d (100 years)", problems);
  } else {
    return value;
  }
  return std::nullopt;
}

std::optional<std::string> read_text(const Item& item, Problems& problems) {
  if (!item.node->is_scalar()) {
    report_rule(item, "text", problems);
    return std::nullopt;
  }
  std::string text = item.node->text;
  while (!text.empty() && text.back() == '\n') text.pop_back();  // a block of text ends with one
  if (text.size() > kMaxTextValueBytes) {
    report_rule(item, "at most " + std::to_string(kMaxTextValueBytes) + " bytes long", problems);
    return std::nullopt;
  }
  std::replace(text.begin(), text.end(), '\n', ' ');
  if (std::any_of(text.begin(), text.end(), is_control)) {
    report_rule(item, "text without control characters", problems);
    return std::nullopt;
  }
  return text;
}

std::optional<Range> read_range(const Item& item, Problems& problems) {
  const std::vector<Node>& ends = item.node->items;
  if (!item.node->is_list() || ends.size() != 2) {
    const std::string count = item.node->is_list() ? " of " + std::to_string(ends.size()) : "";
    problems.add(item.place(), item.path,
                 "is " + described(*item.node) + count + "; must be a list of two numbers, [low, high]");
    return std::nullopt;
  }
  const auto lo = read_number({&ends[0], item.path}, any_number(), problems);
  const auto hi = read_number({&ends[1], item.path}, any_number(), problems);
  if (!lo || !hi) return std::nullopt;
  if (*lo < *hi && *hi - *lo < std::numeric_limits<double>::infinity()) return Range{*lo, *hi};
  problems.add(
      item.place(), item.path,
      "is [" + number_text(*lo) + ", " + number_text(*hi) + "]; its low end must be below its high end");
  return std::nullopt;
}

}  // namespace steelyard::rig
