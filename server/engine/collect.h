// SPDX-License-Identifier: Apache-2.0
// Keeps a set of hypotheses within its budget: equal keys merged, weights normalised, the heaviest kept.
#pragma once

#include <vector>

#include "engine/hypothesis.h"

namespace steelyard::engine {

class Collector {
 public:
  Collector(const Model& model, const Layout& layout);

  /// Sorts by key and merges equal keys by moments.
  void merge_equal(Pool& pool);
  /// Normalises the weights, drops those under `floor` and all but the `budget` heaviest; keeps the order.
  /// Returns the log of the sum of the weights before.
  double normalise(Pool& pool, int budget, double floor);
  /// Indices of the `count` heaviest, heaviest first (ties: by the channels' names).
  const std::vector<int>& heaviest(const Pool& pool, int count);

 private:
  void keep_heaviest(Pool& pool, int budget);
  [[nodiscard]] bool heavier(const Hypothesis& a, const Hypothesis& b) const;

  const Layout& layout_;
  std::vector<int> by_name_;  ///< channels in the order of their names
  std::vector<int> order_;
};

/// Total order of keys, for sorting.
[[nodiscard]] bool key_less(const Hypothesis& a, const Hypothesis& b);

}  // namespace steelyard::engine
