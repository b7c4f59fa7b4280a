// SPDX-License-Identifier: Apache-2.0
// How good a row's estimates are, and what the engine said of its channels meanwhile.
#pragma once

#include <vector>

#include "suite/references.h"

namespace steelyard::suite {

/// Errors of one filter over judged steps and states; sums, so that seeds can be added.
struct Score {
  double squares = 0.0;  ///< of errors, each as a multiple of its state's scale
  double covered = 0.0;  ///< |error| < 1.96 stated sd
  double nees = 0.0;     ///< squares of errors over stated sd
  double count = 0.0;

  void add(const Machine& machine, const Truth& truth, int step, const Vector& mean, const Vector& sd);
  void add(const Score& other);
};

[[nodiscard]] Score score(const Run& run, const Track& track);

/// The root of the ratio of squares: an RMSE ratio over all seeds.
[[nodiscard]] double ratio(const Score& a, const Score& b);

}  // namespace steelyard::suite
