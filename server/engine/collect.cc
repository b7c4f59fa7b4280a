// SPDX-License-Identifier: Apache-2.0
// The compute budget (engine.md §4 step 7). Every order here is total, so results do not depend on the sort.
#include "engine/collect.h"

#include <algorithm>
#include <cmath>

namespace steelyard::engine {

bool key_less(const Hypothesis& a, const Hypothesis& b) {
  if (a.conditions != b.conditions) return a.conditions < b.conditions;
  return a.mode < b.mode;
}

void Collector::merge_equal(Pool& pool) {
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
      merge(pool[kept], pool[i], channels_);
    } else if (++kept != i) {
      pool.swap_items(kept, i);
    }
  }
  if (pool.size() > 0) pool.shrink(kept + 1);
}

double Collector::normalise(Pool& pool, int budget, double floor) {
  double top = -INFINITY;
  for (int i = 0; i < pool.size(); ++i) top = std::max(top, pool[i].log_weight);
  double sum = 0.0;
  for (int i = 0; i < pool.size(); ++i) sum += std::exp(pool[i].log_weight - top);
  const double total = top + std::log(sum);
  double least = std::log(floor);
  if (pool.size() > budget) {
    const auto& best = heaviest(pool, budget);
    least = std::max(least, pool[best.back()].log_weight - total);
  }
  int kept = 0;
  double kept_sum = 0.0;
  for (int i = 0; i < pool.size() && kept < budget; ++i) {
    pool[i].log_weight -= total;
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

const std::vector<int>& Collector::heaviest(const Pool& pool, int count) {
  order_.resize(static_cast<std::size_t>(pool.size()));
  for (std::size_t i = 0; i < order_.size(); ++i) order_[i] = static_cast<int>(i);
  const auto heavier = [&](int a, int b) {
    if (pool[a].log_weight != pool[b].log_weight) return pool[a].log_weight > pool[b].log_weight;
    return key_less(pool[a], pool[b]);
  };
  const auto n = std::min(static_cast<std::size_t>(count), order_.size());
  std::partial_sort(order_.begin(), order_.begin() + static_cast<std::ptrdiff_t>(n), order_.end(), heavier);
  order_.resize(n);
  return order_;
}

}  // namespace steelyard::engine
