// SPDX-License-Identifier: Apache-2.0
// One name, one thing: formulas, logs and results all refer to states, inputs and channels by name alone.
#include "rig/names.h"

#include <algorithm>
#include <tuple>
#include <unordered_map>

#include "rig/formula.h"

namespace steelyard::rig {
namespace {

constexpr std::size_t kMaxNameLength = 63;
constexpr std::string_view kTimeColumn = "time";

bool is_small(char c) { return c >= 'a' && c <= 'z'; }
bool is_digit(char c) { return c >= '0' && c <= '9'; }

bool is_name(std::string_view name) {
  if (name.empty() || name.size() > kMaxNameLength || !is_small(name[0])) return false;
  return std::all_of(name.begin(), name.end(), [](char c) { return is_small(c) || is_digit(c) || c == '_'; });
}

std::string form_problem(std::string_view name) {
  if (!is_name(name)) {
    return "is not a name; a name is a small letter, then small letters, digits and _, at most 63 characters";
  }
  if (is_formula_word(name)) return "has a name that formulas use themselves; choose another";
  if (name == kTimeColumn) return "has the name of the time column in logs; choose another";
  return {};
}

bool is_before(const Declared& a, const Declared& b) {
  return std::tie(a.at.line, a.at.column) < std::tie(b.at.line, b.at.column);
}

}  // namespace

std::vector<std::string> check_names(std::vector<Declared> declared, Problems& problems) {
  std::stable_sort(declared.begin(), declared.end(), is_before);
  std::unordered_map<std::string_view, const Declared*> seen;
  std::vector<std::string> usable;
  for (const Declared& item : declared) {
    if (std::string why = form_problem(item.name); !why.empty()) {
      problems.add(item.at, item.path, std::move(why));
      continue;
    }
    const auto [first, is_new] = seen.emplace(item.name, &item);
    if (is_new) {
      usable.push_back(item.name);
    } else {
      problems.add(item.at, item.path,
                   "has the name of a" + std::string(first->second->kind == "input" ? "n " : " ") +
                       std::string(first->second->kind) + " (line " + std::to_string(first->second->at.line) +
                       "); each name stands for one thing");
    }
  }
  return usable;
}

bool is_rig_name(std::string_view name) {
  if (name.empty() || name.size() > kMaxNameLength) return false;
  return std::all_of(name.begin(), name.end(), [](char c) { return is_small(c) || is_digit(c) || c == '-'; });
}

}  // namespace steelyard::rig
