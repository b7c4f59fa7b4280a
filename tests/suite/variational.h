// SPDX-License-Identifier: Apache-2.0
// The textbook variational filter (Särkkä & Nummenmaa 2009, Recursive noise adaptive Kalman filtering by
// variational Bayesian approximations): one Gaussian times one inverse Gamma a channel.
#pragma once

#include <vector>

#include "suite/filter.h"

namespace steelyard::suite {

/// A variance's inverse Gamma; its point estimate is scale / shape.
struct Learned {
  double shape = 1.0;
  double scale = 1.0;
};

/// One reading of a step.
struct Observed {
  RowVector h;
  double residual = 0.0;
  Learned* noise = nullptr;
};

/// Fuses all readings of a step at once and learns their noise: the paper's iteration, `rounds` times.
/// Forgetting (shape and scale times ρ) is the caller's.
void fuse_variationally(const std::vector<Observed>& readings, int rounds, Filter& filter);

}  // namespace steelyard::suite
