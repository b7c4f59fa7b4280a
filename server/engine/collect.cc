// SPDX-License-Identifier: Apache-2.0
// The compute budget (engine.md §4 step 7). Every order here is total, so results do not depend on the sort.
#include "engine/collect.h"

#include <algorithm>
#include <cmath>
#include <numeric>

namespace steelyard::engine {

Collector::Collector(const Model& model, const Layout& layout) : layout_(layout) {
  by_name_.resize(model.channels.size());
  std::iota(by_name_.begin(), by_name_.end(), 0);
  const auto name = [&](int j) -> const std::string& {
    return model.channels[static_cast<std::size_t>(j)].name;
  };
  std::stable_sort(by_name_.begin(), by_name_.end(), [&](int a, int b) { return name(a) < name(b); });
}

bool key_less(const Hypothesis& a, const Hypothesis& b) {
  if (a.conditions != b.conditions) return a.conditions < b.conditions;
  return a.mode < b.mode;
}

void Collector::merge_equal(Pool& pool) {
  order_.reserve(static_cast<std::size_t>(pool.capacity()));  // once: a pool never grows beyond
  order_.resize(static_cast<std::size_t>(pool.size()));
  for (std::size_t i = 0; i < order_.size(); ++i) order_[i] = static_cast<int>(i);
  std::sort(order_.begin(), order_.end(), [&](int a, int b) {
    if (!pool[a].same_key(pool[b])) return key_less(pool[a], pool[b]);
    return a < b;
  });
  // Applies the permutation by cycles of swaps; order_[i] is where the i-th in order stands at first.
  for (int i = 0; i < pool.size(); ++i) {
    int from = order_[static_cast<std::size_t>(i)];
    while (from < i) from = order_[static_cast<std::size_t>(from)];
    if (from != i) pool.swap_items(i, from);
  }
  int kept = 0;
  for (int i = 1; i < pool.size(); ++i) {
    if (pool[i].same_key(pool[kept])) {
      merge(pool[kept], pool[i], layout_);
    } else if (++kept != i) {
      pool.swap_items(kept, i);
    }
  }
  if (pool.size() > 0) pool.shrink(kept + 1);
}

double Collector::normalise(Pool& pool, int budget, double floor) {
  double top = -INFINITY;
  for (int i = 0; i < pool.size(); ++i) {
    if (std::isnan(pool[i].log_weight)) pool[i].log_weight = -INFINITY;
    top = std::max(top, pool[i].log_weight);
  }
  // What no hypothesis can explain cannot choose between them.
  if (!std::isfinite(top)) {
    for (int i = 0; i < pool.size(); ++i) pool[i].log_weight = 0.0;
    top = 0.0;
  }
  double sum = 0.0;
  for (int i = 0; i < pool.size(); ++i) sum += std::exp(pool[i].log_weight - top);
  const double total = top + std::log(sum);
  for (int i = 0; i < pool.size(); ++i) pool[i].log_weight -= total;
  if (pool.size() > budget) keep_heaviest(pool, budget);
  const double least = std::log(floor);
  int kept = 0;
  double kept_sum = 0.0;
  for (int i = 0; i < pool.size(); ++i) {
    if (!(pool[i].log_weight >= least)) continue;
    kept_sum += std::exp(pool[i].log_weight);
    if (kept != i) pool.swap_items(kept, i);
    ++kept;
  }
  pool.shrink(kept);
  const double correction = std::log(kept_sum);
  for (int i = 0; i < kept; ++i) pool[i].log_weight -= correction;
  return total;
}

void Collector::keep_heaviest(Pool& pool, int budget) {
  heaviest(pool, budget);
  std::sort(order_.begin(), order_.end());
  for (int i = 0; i < budget; ++i)
    if (order_[static_cast<std::size_t>(i)] != i) pool.swap_items(i, order_[static_cast<std::size_t>(i)]);
  pool.shrink(budget);
}

const std::vector<int>& Collector::heaviest(const Pool& pool, int count) {
  order_.reserve(static_cast<std::size_t>(pool.capacity()));
  order_.resize(static_cast<std::size_t>(pool.size()));
  for (std::size_t i = 0; i < order_.size(); ++i) order_[i] = static_cast<int>(i);
  const auto n = std::min(static_cast<std::size_t>(count), order_.size());
  std::partial_sort(order_.begin(), order_.begin() + static_cast<std::ptrdiff_t>(n), order_.end(),
                    [&](int a, int b) { return heavier(pool[a], pool[b]); });
  order_.resize(n);
  return order_;
}

// Children born at one reading have equal weights, and the budget often ends among them. Which of them stay
// must not hang on the order in which channels are declared, nor on rounding: weights within one step of a
// grid are equal, and ties go by the channels' names.
bool Collector::heavier(const Hypothesis& a, const Hypothesis& b) const {
  constexpr double kGrid = 0x1p20;
  const double wa = a.log_weight * kGrid;
  const double wb = b.log_weight * kGrid;
  if (std::fabs(wa - wb) > 1.0) return wa > wb;
  if (std::floor(wa) != std::floor(wb)) return wa > wb;
  for (const int j : by_name_)
    if (a.conditions.of(j) != b.conditions.of(j)) return a.conditions.of(j) < b.conditions.of(j);
  return a.mode < b.mode;
}

}  // namespace steelyard::engine
