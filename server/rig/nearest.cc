// SPDX-License-Identifier: Apache-2.0
// Edit distance by dynamic programming over three rows.
#include "rig/nearest.h"

#include <algorithm>
#include <cstddef>
#include <numeric>
#include <utility>
#include <vector>

namespace steelyard::rig {
namespace {

constexpr std::size_t kMaxLength = 64;  // longer names are no slips of the pen, and would cost time
constexpr std::size_t kMostListed = 25;

}  // namespace

int edit_distance(std::string_view a, std::string_view b) {
  std::vector<int> before(b.size() + 1);
  std::vector<int> above(b.size() + 1);
  std::vector<int> row(b.size() + 1);
  std::iota(above.begin(), above.end(), 0);
  for (std::size_t i = 1; i <= a.size(); ++i) {
    row[0] = static_cast<int>(i);
    for (std::size_t j = 1; j <= b.size(); ++j) {
      const int replaced = above[j - 1] + (a[i - 1] == b[j - 1] ? 0 : 1);
      row[j] = std::min({above[j] + 1, row[j - 1] + 1, replaced});
      const bool swapped = i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1];
      if (swapped) row[j] = std::min(row[j], before[j - 2] + 1);
    }
    std::swap(before, above);
    std::swap(above, row);
  }
  return above[b.size()];
}

std::string_view nearest(std::string_view name, std::span<const std::string_view> known) {
  if (name.size() > kMaxLength) return {};
  std::string_view best;
  int fewest = static_cast<int>((name.size() + 3) / 3) + 1;
  for (const std::string_view candidate : known) {
    if (candidate.size() > kMaxLength) continue;
    const int edits = edit_distance(name, candidate);
    if (edits < fewest) {
      fewest = edits;
      best = candidate;
    }
  }
  return best;
}

std::string did_you_mean(std::string_view name, std::span<const std::string_view> known) {
  const std::string_view best = nearest(name, known);
  if (!best.empty()) return "; did you mean " + std::string(best) + "?";
  if (known.empty() || known.size() > kMostListed) return {};
  std::string all;
  for (const std::string_view other : known) all += (all.empty() ? "" : ", ") + std::string(other);
  return "; known are " + all;
}

}  // namespace steelyard::rig
